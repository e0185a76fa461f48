package main

import (
	"fmt"
	"runtime"
	"runtime/debug"
)

// release is set when a release is built: -ldflags "-X main.release=v1.2.3".
var release string

// A build says which program this is.
type build struct {
	Version string `json:"version"`
	Commit  string `json:"commit,omitempty"`
	Go      string `json:"go"`
	Arch    string `json:"arch"` // GOARCH; results may differ in the last bit between architectures
}

func version() build {
	b := build{Version: release, Go: runtime.Version(), Arch: runtime.GOARCH}
	info, ok := debug.ReadBuildInfo()
	if !ok {
		info = &debug.BuildInfo{}
	}
	for _, s := range info.Settings {
		if s.Key == "vcs.revision" {
			b.Commit = s.Value
		}
	}
	if b.Version == "" {
		b.Version = info.Main.Version
	}
	if b.Version == "" || b.Version == "(devel)" {
		b.Version = "devel"
	}
	return b
}

func (b build) String() string {
	s := "offplane " + b.Version
	if b.Commit != "" {
		s += " " + b.Commit
	}
	return fmt.Sprintf("%s %s %s", s, b.Go, b.Arch)
}
