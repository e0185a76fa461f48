package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"

	"offplane/compare/report"
)

// A figureFile is the value of --figure: a file whose name ends in .png or .svg, in a
// folder that exists.
type figureFile struct {
	path   string // empty: no figure
	format report.Format
}

func (f *figureFile) String() string { return f.path }
func (f *figureFile) Type() string   { return "file" }

func (f *figureFile) Set(path string) (err error) {
	if f.format, err = report.FormatOf(path); err != nil {
		return err
	}
	dir := filepath.Dir(path)
	if i, err := os.Stat(dir); err != nil || !i.IsDir() { // told before anything is computed
		return fmt.Errorf("there is no folder %s", dir)
	}
	f.path = path
	return nil
}

// bothFormats names the files of a figure in a folder.
func bothFormats(name string) []string { return []string{name + ".png", name + ".svg"} }

// writeFigure draws a figure in both formats into a folder.
func (f *folder) writeFigure(name string, draw func(report.Format) []byte) error {
	for i, path := range bothFormats(name) {
		err := f.write(path, func(w io.Writer) error {
			_, err := w.Write(draw(report.Format(i)))
			return err
		})
		if err != nil {
			return err
		}
	}
	return nil
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
