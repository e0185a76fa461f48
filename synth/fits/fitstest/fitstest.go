// Package fitstest runs the outside tools that judge our files: fitsverify and
// the solar Python packages. Tests that use it carry the build tag outside and
// fail where a tool is missing.
package fitstest

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// Verify fails the test unless fitsverify finds no error and no warning.
func Verify(t testing.TB, paths ...string) {
	t.Helper()
	for _, path := range paths {
		out, err := exec.Command("fitsverify", "-q", path).CombinedOutput()
		if err != nil || !strings.HasPrefix(string(out), "verification OK") {
			full, _ := exec.Command("fitsverify", path).CombinedOutput()
			t.Errorf("fitsverify: %s %v\n%s", out, err, full)
		}
	}
}

// Python runs a script, which begins with Strict as a rule, and returns what it
// printed. The interpreter is the first python3 on PATH that has astropy:
// packages of the system belong to its own interpreter, which need not be the
// first.
func Python(t testing.TB, script string, args ...string) string {
	t.Helper()
	for _, dir := range filepath.SplitList(os.Getenv("PATH")) {
		python := filepath.Join(dir, "python3")
		if exec.Command(python, "-c", "import astropy, sunpy").Run() != nil {
			continue
		}
		cmd := exec.Command(python, append([]string{"-c", script}, args...)...)
		cmd.Env = append(os.Environ(), "HOME="+t.TempDir())
		out, err := cmd.CombinedOutput()
		if err != nil {
			t.Fatalf("%s: %v\n%s", python, err, out)
		}
		return string(out)
	}
	t.Fatal("no python3 on PATH can import astropy and sunpy")
	return ""
}

// Strict is the head of a script: imports first, for some warn by themselves,
// then every warning is an error but the one about the age of the installation.
const Strict = `
import sys, warnings
import numpy as np
from astropy.io import fits
from astropy.wcs import WCS
import sunpy.map
warnings.simplefilter("error")
warnings.filterwarnings("ignore", "leap-second file is expired")
`
