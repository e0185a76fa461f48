package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"

	"offplane/synth/fits"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"offplane": main})
}

// TestScripts plays the scripts in testdata/script, each in a folder of its own that
// holds tiny.yaml.
func TestScripts(t *testing.T) {
	tiny, err := os.ReadFile("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata/script",
		RequireExplicitExec: true,
		Setup: func(e *testscript.Env) error {
			return os.WriteFile(filepath.Join(e.WorkDir, "tiny.yaml"), tiny, 0o666)
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"exit": scriptExit, "same": scriptSame, "only": scriptOnly, "hold": scriptHold,
			"strip": scriptStrip, "samedata": scriptSameData, "image": scriptImage, "number": scriptNumber,
			"carries": scriptCarries,
		},
	})
}

// scriptExit plays a command and checks its exit code: exit CODE COMMAND...
func scriptExit(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exit CODE COMMAND...")
	}
	err := ts.Exec(args[1], args[2:]...)
	code := 0
	if err != nil {
		x, ok := err.(interface{ ExitCode() int })
		if !ok {
			ts.Fatalf("%v", err)
		}
		code = x.ExitCode()
	}
	if strconv.Itoa(code) != args[0] {
		ts.Fatalf("exit code %d, want %s", code, args[0])
	}
}

// scriptSame compares files of two folders byte for byte, all but run.json if none is
// named: same DIR DIR [FILE]...
func scriptSame(ts *testscript.TestScript, neg bool, args []string) {
	names := args[2:]
	if len(names) == 0 {
		names = files(ts, args[0])
		if other := files(ts, args[1]); !slices.Equal(names, other) {
			ts.Fatalf("%v in %s, %v in %s", names, args[0], other, args[1])
		}
		names = slices.DeleteFunc(names, func(s string) bool { return s == recordName })
	}
	for _, name := range names {
		a, b := ts.ReadFile(filepath.Join(args[0], name)), ts.ReadFile(filepath.Join(args[1], name))
		if (a == b) == neg {
			ts.Fatalf("%s: equal is %v", name, a == b)
		}
	}
}

func files(ts *testscript.TestScript, dir string) []string {
	list, err := os.ReadDir(ts.MkAbs(dir))
	ts.Check(err)
	var names []string
	for _, e := range list {
		names = append(names, e.Name())
	}
	return names
}

// scriptOnly checks that a folder holds these files and no other: only DIR FILE...
func scriptOnly(ts *testscript.TestScript, neg bool, args []string) {
	want := slices.Sorted(slices.Values(args[1:]))
	if got := files(ts, args[0]); slices.Equal(got, want) == neg {
		ts.Fatalf("%s holds %v, want %v", args[0], got, want)
	}
}

// scriptHold takes the lock of a folder for the rest of the script: hold DIR
func scriptHold(ts *testscript.TestScript, _ bool, args []string) {
	f, err := os.OpenFile(filepath.Join(ts.MkAbs(args[0]), markerName), os.O_RDWR|os.O_CREATE, 0o666)
	ts.Check(err)
	ts.Check(lock(f))
	ts.Defer(func() { f.Close() })
}

// scriptStrip copies an observation without any card but the world coordinates of the
// sky, and without the columns that have a default: strip IN OUT
func scriptStrip(ts *testscript.TestScript, _ bool, args []string) {
	in, err := fits.Open(ts.MkAbs(args[0]))
	ts.Check(err)
	defer in.Close()
	out, err := fits.Create(ts.MkAbs(args[1]), nil)
	ts.Check(err)
	defer out.Abort()
	for _, h := range in.HDUs[1:] {
		if !h.IsImage() {
			t, err := in.Table(h.Name)
			ts.Check(err)
			t.Header = nil
			ts.Check(out.AddTable(*t))
			continue
		}
		c, err := in.Cube(h.Name)
		ts.Check(err)
		w, err := out.Cube(h.Name, cards(c.Header, "WCSAXES", "CTYPE", "CUNIT", "CDELT", "CRPIX", "CRVAL"), c.Axes...)
		ts.Check(err)
		plane := make([]float32, c.Axes[0]*c.Axes[1])
		for i := range c.Planes() {
			ts.Check(c.ReadPlane(i, plane))
			ts.Check(w.WritePlane(plane))
		}
	}
	ts.Check(out.Close())
}

// cards returns the cards whose keywords have these beginnings.
func cards(h fits.Header, beginnings ...string) fits.Header {
	return slices.DeleteFunc(slices.Clone(h), func(c fits.Card) bool {
		return !slices.ContainsFunc(beginnings, func(b string) bool { return strings.HasPrefix(c.Key, b) })
	})
}

// scriptSameData compares the images of two files bit for bit: samedata A B
func scriptSameData(ts *testscript.TestScript, _ bool, args []string) {
	var f [2]*fits.File
	for i := range f {
		var err error
		f[i], err = fits.Open(ts.MkAbs(args[i]))
		ts.Check(err)
		defer f[i].Close()
	}
	n := 0
	for _, h := range f[0].HDUs {
		if !h.IsImage() || h.Name == "" {
			continue
		}
		a, err := f[0].Image(h.Name)
		ts.Check(err)
		b, err := f[1].Image(h.Name)
		ts.Check(err)
		// %x tells every bit of a float but those of NaN, of which files have one kind.
		if fmt.Sprintf("%x %x", a.Data, a.Ints) != fmt.Sprintf("%x %x", b.Data, b.Ints) {
			ts.Fatalf("%s differs", h.Name)
		}
		n++
	}
	if n < 16 {
		ts.Fatalf("only %d images", n)
	}
}

// scriptImage copies one image of a file into a file of its own, its values times a
// factor, with few cards: image IN[EXT] OUT FACTOR
func scriptImage(ts *testscript.TestScript, _ bool, args []string) {
	file, ext, _ := strings.Cut(strings.TrimSuffix(args[0], "]"), "[")
	in, err := fits.Open(ts.MkAbs(file))
	ts.Check(err)
	defer in.Close()
	m, err := in.Image(ext)
	ts.Check(err)
	factor, err := strconv.ParseFloat(args[2], 32)
	ts.Check(err)
	for i := range m.Data {
		m.Data[i] *= float32(factor)
	}
	out, err := fits.Create(ts.MkAbs(args[1]), nil)
	ts.Check(err)
	defer out.Abort()
	header := cards(m.Header, "BUNIT", "WCSAXES", "CTYPE", "CUNIT", "CDELT", "CRPIX", "CRVAL", "PC1", "PC2", "DATE-OBS", "DSUN_OBS")
	ts.Check(fits.AddImage(out, "MINE", header, m.Axes, m.Data))
	ts.Check(out.Close())
}

// scriptNumber checks a number of a JSON file: number FILE KEY.KEY LOW HIGH
func scriptNumber(ts *testscript.TestScript, neg bool, args []string) {
	var doc any
	ts.Check(json.Unmarshal([]byte(ts.ReadFile(args[0])), &doc))
	v, ok := lookup(doc, strings.Split(args[1], "."))
	low, err := strconv.ParseFloat(args[2], 64)
	ts.Check(err)
	high, err := strconv.ParseFloat(args[3], 64)
	ts.Check(err)
	if (ok && v >= low && v <= high) == neg {
		ts.Fatalf("%s: %s is %v (%v)", args[0], args[1], v, ok)
	}
}

// scriptCarries checks that a one-row table holds a text file byte for byte:
// carries FILE.fits TABLE TEXT
func scriptCarries(ts *testscript.TestScript, _ bool, args []string) {
	f, err := fits.Open(ts.MkAbs(args[0]))
	ts.Check(err)
	defer f.Close()
	t, err := f.Table(args[1])
	ts.Check(err)
	got, err := t.Bytes("yaml", 0)
	ts.Check(err)
	if string(got) != ts.ReadFile(args[2]) {
		ts.Fatalf("%s[%s] holds\n%s", args[0], args[1], got)
	}
}

// call executes the program in this process.
func call(args ...string) (code int, stdout, stderr string) {
	var out, err bytes.Buffer
	code = Main(args, &out, &err)
	return code, out.String(), err.String()
}

// TestMisuse: every wrong command line says in one line what would be right.
func TestMisuse(t *testing.T) {
	t.Chdir(t.TempDir())
	for _, c := range []struct{ line, say string }{
		{"rnu", `did you mean "run"`},
		{"run", "needs the name of a scenario"},
		{"run quick extra -o x", `"extra" is too much`},
		{"run quick", "-o DIR"},
		{"run quik -o x", `did you mean "quick"`},
		{"run quick.yaml -o x", "the embedded scenario is called quick"},
		{"run quick -o x --worker 2", "did you mean --workers"},
		{"run quick -o x --workers two", "invalid argument"},
		{"run quick -o x --seed -1", "invalid argument"},
		{"run quick -o x --require valid_fraction", "must be KEY>=NUMBER"},
		{"run quick -o x --require valid_fractoin>=0.5", `did you mean "valid_fraction"`},
		{"run quick -o x --require ratios.field.sky>=1", "is not a number"},
		{"run quick -o x --require ratios.field.sky.median.x>=1", "nothing below"},
		{"run quick -o x --require heights.first.valid>=1", "must be a number from 0"},
		{"run quick -o x --require valid_fraction>=half", "not a number"},
		{"synth nowhere.yaml -o x", "nowhere.yaml"},
		{"invert nowhere.fits -o x", "nowhere.fits"},
		{"invert nowhere.fits -o x --with none.yaml", "none.yaml"},
		{"compare -o x", "--truth"},
		{"compare --truth t.fits -o x", "--inferred"},
		{"compare --truth t.fits --inferred i.fits -o x", "t.fits"},
		{"compare extra", "takes no argument"},
		{"scenario lits", `did you mean "list"`},
		{"scenario show", "needs the name"},
		{"scenario list now", "takes no argument"},
		{"line --density many", "--density"},
		{"line --density 1e30", "1e+30"},
		{"line --height 0.5", "0.5"},
		{"line --temperature 1.6parsec", "--temperature"},
		{"line --ratio 5", "above the range"},
		{"line --ratio 0.3 --density 1e8", "exclude each other"},
		{"line --law solomon", "gibson-1999"},
		{"line --law gibson-1989", `did you mean "gibson-1999"`},
		{"help rnu", `did you mean "run"`},
		{"help table biuld", `did you mean "build"`},
		{"help run extra", `"extra" is too much`},
		{"completion bahs", `did you mean "bash"`},
		{"table show skye", `did you mean "sky"`},
		{"table build x --truth sky --features heigth -o y", `did you mean "height"`},
		{"ensemble run smal -o x", `did you mean "small"`},
		{"plan quiet-nihgt -o x", `did you mean "quiet-night"`},
		{"compare --true BSKY=a.fits --map B=a.fits -o x", `did you mean "B_SKY"`},
		{"compare --true B_SKY=a.fits --map B=a.fits -o x", "a.fits"},
	} {
		code, stdout, stderr := call(strings.Fields(c.line)...)
		if code != exitMisuse || stdout != "" {
			t.Errorf("%s: code %d, stdout %q", c.line, code, stdout)
		}
		if !strings.HasPrefix(stderr, "offplane: ") || strings.Count(stderr, "\n") != 1 || !strings.Contains(stderr, c.say) {
			t.Errorf("%s: want one line with %q, got\n%s", c.line, c.say, stderr)
		}
	}
	if list, err := os.ReadDir("."); err != nil || len(list) > 0 {
		t.Errorf("left behind: %v %v", list, err)
	}
	// Mistakes in assignments are located; the last line counts them.
	code, _, stderr := call("run", "quick", "-o", "x", "--set", "camera.cadense=3 s", "--set", "image.inner=7")
	if code != exitMisuse || !strings.Contains(stderr, `camera.cadense`) || !strings.Contains(stderr, "image.inner") || !strings.HasSuffix(stderr, "offplane: 2 problems in the input\n") {
		t.Errorf("code %d\n%s", code, stderr)
	}
}

func TestVersionAndHelp(t *testing.T) {
	code, stdout, stderr := call("--version")
	b := version()
	if code != exitOK || stderr != "" || stdout != b.String()+"\n" || !strings.Contains(stdout, b.Go) || !strings.HasSuffix(stdout, b.Arch+"\n") || b.Version == "" {
		t.Errorf("%d %q %q", code, stdout, stderr)
	}
	for _, args := range [][]string{{}, {"--help"}, {"scenario"}, {"run", "-h"}} {
		if code, stdout, stderr := call(args...); code != exitOK || stderr != "" || !strings.Contains(stdout, "Usage:") {
			t.Errorf("%v: %d %q %q", args, code, stdout, stderr)
		}
	}
}
