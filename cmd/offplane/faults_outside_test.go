//go:build outside && linux

package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestFaults prepares what commands read once and has them killed, without room and without
// a network. The long trial of kills is in .ci/soak.
func TestFaults(t *testing.T) {
	dir := t.TempDir()
	killed, others := victims(t, dir), writers(t, dir)
	t.Run("kills", func(t *testing.T) { tryKills(t, dir, killed, 20) })
	t.Run("room", func(t *testing.T) { tryNoRoom(t, dir, killed, others) })
	t.Run("held", func(t *testing.T) { tryHeld(t, dir, append(killed, others...)) })
	t.Run("network", func(t *testing.T) { tryNoNetwork(t, dir) })
	t.Run("loopback", func(t *testing.T) { tryLoopback(t, dir) })
}

// far is how many of the writers take little time to their results.
const far = 4

// writers are the other commands that write, upon what victims left in dir.
func writers(t *testing.T, dir string) []victim {
	t.Helper()
	campaignFile(t, dir)
	return []victim{
		{name: "synth", args: []string{"synth", "tiny.yaml", "--quiet"}},
		{name: "invert", args: []string{"invert", "data/observation.fits", "--quiet", "--set", "box=11", "--set", "track=11"}},
		{name: "compare", args: []string{"compare", "--truth", "data/truth.fits", "--inferred", "data/inferred.fits", "--quiet"}},
		{name: "plan", args: []string{"plan", "campaign.yaml", "--quiet"}},
		{name: "budget", args: []string{"budget", "tiny.yaml", "--realisations", "2", "--quiet"}},
		{name: "submit", args: []string{"ensemble", "submit", "few.yaml", "--engine", "other"}},
		{name: "manual", args: []string{"manual"}},
		{name: "explain.png", args: []string{"explain", "data", "--polar", "270,1.15"}, file: "--figure"},
		{name: "scenario.svg", args: []string{"scenario", "show", "tiny.yaml"}, file: "--figure"},
		{name: "line.png", args: []string{"line"}, file: "--figure"},
		{name: "line.ecsv", args: []string{"line"}, file: "--ecsv"},
		{name: "table.ecsv", args: []string{"table", "show"}, file: "--ecsv"},
	}
}

// inNamespace returns a shell command line in mount and network namespaces of its own, as
// root or in a user namespace.
func inNamespace(script string) []string {
	words := []string{"unshare", "--mount", "--net"}
	if os.Getuid() != 0 {
		words = append(words, "--map-root-user")
	}
	return append(words, "sh", "-ec", script)
}

// A full disk, a limit on the size of files and a folder that cannot be written to give
// one message, exit code 1, and nothing that looks complete. The victims get as far as
// their results; for the others the disk is full from the start.
func tryNoRoom(t *testing.T, dir string, killed, others []victim) {
	const (
		full   = "mkdir -p full && mount -t tmpfs -o size=16k none full && "
		sealed = "mkdir -p bound && mount --bind bound bound && mount -o remount,bind,ro bound && "
	)
	try := func(name, script, say string) {
		t.Run(name, func(t *testing.T) {
			p := startCommand(t, dir, inNamespace(script)...)
			p.finish(exitFailed)
			said := p.stderr.String()
			if strings.Count(said, "\n") != 1 || !strings.HasPrefix(said, "offplane: ") || !strings.Contains(said, say) {
				t.Errorf("want one line with %q, got\n%s", say, said)
			}
		})
	}
	for _, v := range append(killed, others[:far]...) {
		command := "exec offplane " + strings.Join(v.args, " ") + " -o "
		try(v.name+", full disk", full+command+"full/out", "no space left on device")
		try(v.name+", file size", "ulimit -f 8 && "+command+"long-"+v.name, "file too large")
		if exists(filepath.Join(dir, "long-"+v.name, recordName)) {
			t.Errorf("%s: the folder looks complete", v.name)
		}
	}
	for _, v := range append(killed, others...) {
		command := "exec offplane " + strings.Join(v.args, " ") + " "
		to := func(dir string) string {
			if v.file != "" {
				return v.file + " " + dir + "/out" + filepath.Ext(v.name)
			}
			return "-o " + dir + "/out"
		}
		try(v.name+", no disk left", full+"(head -c 16k /dev/zero >full/ballast || true) 2>&- && "+command+to("full"), "no space left on device")
		try(v.name+", read-only", sealed+command+to("bound"), "read-only file system")
		if v.file == "" {
			try(v.name+", read-only itself", sealed+command+"-o bound", "read-only file system")
		}
	}
	for _, command := range []string{"line", "line --json", "scenario list", "scenario show quick", "table show", "ensemble list", "--help", "completion bash"} {
		try(command+", nowhere to print", "exec offplane "+command+" >/dev/full", "no space left on device")
	}
}

// Two processes do not work in one folder: the second is refused.
func tryHeld(t *testing.T, dir string, all []victim) {
	held := filepath.Join(dir, "held")
	if err := os.Mkdir(held, 0o777); err != nil {
		t.Fatal(err)
	}
	f, err := os.Create(filepath.Join(held, markerName))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if err := lock(f); err != nil {
		t.Fatal(err)
	}
	for _, v := range all {
		if v.file != "" || v.name == "submit" || v.name == "manual" { // scripts and pages may be written twice
			continue
		}
		p := start(t, dir, append(v.args, "-o", "held")...)
		p.finish(exitMisuse)
		if want := "offplane: held is held by another process that writes to it\n"; p.stderr.String() != want {
			t.Errorf("%s: %s", v.name, p.stderr.String())
		}
	}
	if list, err := os.ReadDir(held); err != nil || len(list) != 1 {
		t.Errorf("left %v, %v", list, err)
	}
}

// No command needs a network: all work where there is none, not even a loopback.
func tryNoNetwork(t *testing.T, dir string) {
	small := " --set 'image.from=268 deg' --set 'image.to=272 deg'"
	script := strings.Join([]string{
		"test \"$(cat /proc/net/route | wc -l)\" -le 1",
		"offplane run tiny.yaml --quiet --frames -o net/run",
		"offplane synth tiny.yaml" + small + " --quiet -o net/data",
		"offplane invert net/run/observation.fits --set box=11 --set track=11 --quiet -o net/maps",
		"offplane compare --truth net/run/truth.fits --inferred net/maps/inferred.fits --quiet -o net/verdict",
		"offplane explain net/run --polar 270,1.15 >net/explained",
		"offplane table apply net/run/inferred.fits --recipe track=31 --recipe pixel=4.35 --quiet -o net/corrected",
		"offplane table build fifty --features height --quiet -o net/table",
		"offplane table show >net/shown",
		"offplane scenario check tiny.yaml >net/checked",
		"offplane line --height 1.1,1.2 >net/line",
		"offplane ensemble show small >net/ensemble",
		"offplane ensemble run few.yaml --quiet -o net/few",
		"offplane ensemble submit few.yaml --engine other -o net/more >net/scripts",
		"offplane budget tiny.yaml" + small + " --set 'image.outer=1.15 Rsun' --realisations 2 --quiet -o net/terms",
		"offplane plan campaign.yaml --quiet -o net/plan",
		"offplane exact >net/exact",
		"offplane manual -o net/man",
	}, "\n")
	startCommand(t, dir, inNamespace(script)...).finish(0)
	for _, folder := range []string{"run", "data", "maps", "verdict", "corrected", "table", "few", "terms", "plan"} {
		if !exists(filepath.Join(dir, "net", folder, recordName)) {
			t.Errorf("%s is not complete", folder)
		}
	}
}

// The viewer is on the loopback and nowhere else: it answers where there is no other
// network, listens at 127.0.0.1 alone, and ends by an interrupt.
func tryLoopback(t *testing.T, dir string) {
	if err := os.WriteFile(filepath.Join(dir, "look.py"), []byte(lookAround), 0o666); err != nil {
		t.Fatal(err)
	}
	p := startCommand(t, dir, inNamespace("exec /usr/bin/python3 look.py")...)
	p.finish(0)
	if got := p.stdout.String(); got != "page\n127.0.0.1\nended\n" {
		t.Errorf("%s%s", got, p.stderr.String())
	}
}

// lookAround brings the loopback up (ioctl 0x8914, flags up and running), opens the page and
// lists who listens (state 0A of proc(5)).
const lookAround = `
import fcntl, glob, signal, socket, struct, subprocess, urllib.request
s = socket.socket()
fcntl.ioctl(s, 0x8914, struct.pack("16sH14s", b"lo", 0x41, b""))
view = subprocess.Popen(["offplane", "view", "data"], stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True)
page = urllib.request.urlopen(view.stdout.readline().strip()).read()
print("page" if b"<html" in page else page)
for path in glob.glob("/proc/net/tcp*") + glob.glob("/proc/net/udp*"):
    for line in open(path).read().splitlines()[1:]:
        f = line.split()
        if f[3] == "0A" or "udp" in path:
            print(socket.inet_ntoa(struct.pack("<L", int(f[1].split(":")[0], 16))))
view.send_signal(signal.SIGINT)
view.wait()
print("ended" if view.returncode >= 0 else view.returncode)
`
