package main

import (
	"io"
	"path/filepath"

	"offplane/compare/report"
)

// A figureFile is the value of --figure: a file whose name ends in .png or .svg.
type figureFile struct {
	path   string // empty: no figure
	format report.Format
}

func (f *figureFile) String() string { return f.path }
func (f *figureFile) Type() string   { return "file" }

func (f *figureFile) Set(path string) (err error) {
	f.format, err = report.FormatOf(path)
	f.path = path
	return err
}

// write draws the figure, if one was asked for.
func (f *figureFile) write(draw func(report.Format) []byte) error {
	if f.path == "" {
		return nil
	}
	at := folder{dir: filepath.Dir(f.path)}
	return at.write(filepath.Base(f.path), func(w io.Writer) error {
		_, err := w.Write(draw(f.format))
		return err
	})
}
