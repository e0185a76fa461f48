package main

import (
	"bytes"
	"context"
	"embed"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"text/template"

	"github.com/spf13/cobra"

	"offplane/compare/ensemble"
	"offplane/scenarios"
)

//go:embed engines/*.sh
var engines embed.FS

// A submission is how an ensemble goes to a batch engine.
type submission struct {
	engine  string
	out     string
	submit  bool
	most    int // tasks in one array; 0: ask the engine
	atOnce  int
	cores   int
	memory  string
	time    string
	options []string
	retry   bool
}

func (p *program) ensembleSubmit() *cobra.Command {
	var s submission
	cmd := &cobra.Command{
		Use:   "submit ENSEMBLE -o DIR",
		Short: "Write the job scripts of a batch engine, and submit them if asked to",
		Long: `submit writes into DIR/jobs a script for an array of tasks that compute the members that
are not there yet, and one that gathers them after it, and shows both. With --go it
submits them; without, nothing leaves this machine. If the engine's arrays cannot have
as many tasks as there are members, a task computes several.

Engines: slurm; other, a pattern in which you fill in the engine's own directives.`,
		Example: `  offplane ensemble submit belts -o belts --engine slurm --time 20 --memory 4G
  offplane ensemble submit belts -o belts --engine slurm --option --partition=short --go`,
		Args:              argument("the name of an ensemble or a file"),
		ValidArgsFunction: cobra.FixedCompletions(ensemble.Names(), cobra.ShellCompDirectiveDefault),
	}
	f := cmd.Flags()
	f.StringVarP(&s.out, "output", "o", "", "`folder` for the results; every node must see it")
	f.StringVar(&s.engine, "engine", "slurm", "slurm or other")
	f.BoolVar(&s.submit, "go", false, "submit")
	f.IntVar(&s.most, "array-limit", 0, "most tasks of one array; 0: what the engine says, or 1000")
	f.IntVar(&s.atOnce, "at-once", 0, "most tasks at a time; 0: as the engine likes")
	f.IntVar(&s.cores, "cores", 1, "of a task, which computes as many members at a time")
	f.StringVar(&s.memory, "memory", "", "of a task, as the engine writes it")
	f.StringVar(&s.time, "time", "", "limit of a task, as the engine writes it")
	f.StringArrayVar(&s.options, "option", nil, "further `directive` of the engine, such as --partition=short; repeatable")
	f.BoolVar(&s.retry, "retry-failed", false, "compute again what failed")
	cmd.RunE = do(func(ctx context.Context, args []string) error { return p.submit(ctx, args[0], &s) })
	return cmd
}

func (p *program) submit(ctx context.Context, name string, s *submission) error {
	if err := s.check(); err != nil {
		return err
	}
	l, err := ensemble.Load(name)
	if err != nil {
		return misuse(err)
	}
	m := members{work: work{out: s.out}, retry: true}
	if err := m.prepare(name, l); err != nil {
		return err
	}
	set, err := ensemble.Open(s.out)
	if err != nil {
		return err
	}
	todo := set.Missing
	if s.retry {
		todo = append(todo, set.Failed...)
	}
	if len(todo) == 0 {
		return misusef("%s: no member is missing; offplane ensemble gather %s", s.out, s.out)
	}
	array, gather, err := s.scripts(ctx, name, l, todo)
	if err != nil {
		return err
	}
	for _, path := range []string{array, gather} {
		text, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		fmt.Fprintf(p.stdout, "# %s\n%s\n", path, text)
	}
	if !s.submit {
		p.say("nothing is submitted without --go")
		return nil
	}
	return s.send(ctx, p.stdout, array, gather)
}

func (s *submission) check() error {
	switch {
	case s.out == "":
		return misusef("offplane ensemble submit needs a folder for the results: -o DIR")
	case s.engine != "slurm" && s.engine != "other":
		return misusef("--engine %s: the engines are slurm and other", s.engine)
	case s.submit && s.engine != "slurm":
		return misusef("--go: only slurm is known well enough to submit to; fill in the pattern and submit it yourself")
	case s.most < 0 || s.atOnce < 0:
		return misusef("--array-limit and --at-once must be 0 or more")
	case s.cores < 1:
		return misusef("--cores %d: must be 1 or more", s.cores)
	}
	for _, text := range append([]string{s.memory, s.time}, s.options...) {
		if strings.ContainsAny(text, "\n\r") {
			return misusef("%q: a directive is one line", text)
		}
	}
	return nil
}

// scripts writes both scripts into the folder and returns their paths.
func (s *submission) scripts(ctx context.Context, name string, l *ensemble.Loaded, todo []int) (array, gather string, err error) {
	program, err := os.Executable()
	if err != nil {
		return "", "", err
	}
	if strings.Contains(program, "go-build") {
		return "", "", misusef("%s goes away when go run ends: build the program first (go build ./cmd/offplane)", program)
	}
	dir, err := filepath.Abs(s.out)
	if err != nil {
		return "", "", err
	}
	if scenarios.IsFile(name) {
		if name, err = filepath.Abs(name); err != nil {
			return "", "", err
		}
	}
	jobs := filepath.Join(dir, "jobs")
	if strings.ContainsAny(dir, "\n\r%") || strings.Contains(dir, " ") && s.engine == "slurm" {
		return "", "", misusef("%q: the engine cannot write its log into a folder of this name", dir)
	}
	if err := os.MkdirAll(jobs, 0o777); err != nil {
		return "", "", err
	}
	most := s.most
	if most == 0 {
		most = s.askLimit(ctx)
	}
	tasks := min(l.Members, most)
	data := struct {
		Name, Array, Memory, Time, Log, Program, Ensemble, Folder string
		AtOnce, Cores, Members, Tasks                             int
		Options                                                   []string
		Retry                                                     bool
	}{
		jobName(l.Name), ranges(todo, tasks), s.memory, s.time, jobs, quoteShell(program), quoteShell(name), quoteShell(dir),
		s.atOnce, s.cores, l.Members, tasks, s.options, s.retry,
	}
	var paths [2]string
	for i, part := range []string{"array", "gather"} {
		t, err := template.ParseFS(engines, "engines/"+s.engine+"-"+part+".sh")
		if err != nil {
			return "", "", err
		}
		var b bytes.Buffer
		if err := t.Execute(&b, data); err != nil {
			return "", "", err
		}
		paths[i] = filepath.Join(jobs, part+".sh")
		if err := os.WriteFile(paths[i], b.Bytes(), 0o777); err != nil {
			return "", "", err
		}
	}
	return paths[0], paths[1], nil
}

// askLimit returns how many tasks an array may have; Slurm's own default where it cannot
// be asked.
func (s *submission) askLimit(ctx context.Context) int {
	if s.engine == "slurm" {
		text, err := exec.CommandContext(ctx, "scontrol", "show", "config").Output()
		if m := arraySize.FindSubmatch(text); err == nil && m != nil {
			if n, err := strconv.Atoi(string(m[1])); err == nil && n > 0 {
				return n // indices run from 0 to one below it
			}
		}
	}
	return 1000
}

var arraySize = regexp.MustCompile(`(?m)^MaxArraySize\s*=\s*([0-9]+)`)

// ranges returns the indices of the tasks that compute these members, as 0-3,7.
func ranges(members []int, tasks int) string {
	wanted := make([]bool, tasks+1)
	for _, i := range members {
		wanted[i%tasks] = true
	}
	var parts []string
	for from := 0; from < tasks; from++ {
		if !wanted[from] {
			continue
		}
		to := from
		for wanted[to+1] {
			to++
		}
		part := strconv.Itoa(from)
		if to > from {
			part += "-" + strconv.Itoa(to)
		}
		parts, from = append(parts, part), to
	}
	return strings.Join(parts, ",")
}

// send submits the array, and the gathering after it whatever becomes of its tasks.
func (s *submission) send(ctx context.Context, out io.Writer, array, gather string) error {
	job, err := sbatch(ctx, array)
	if err != nil {
		return err
	}
	fmt.Fprintf(out, "array   %s\n", job)
	after, err := sbatch(ctx, "--dependency=afterany:"+job, gather)
	if err != nil {
		return fmt.Errorf("%w (the array is submitted; offplane ensemble gather %s when it is done)", err, s.out)
	}
	fmt.Fprintf(out, "gather  %s\n", after)
	return nil
}

// sbatch submits a script and returns the number of the job.
func sbatch(ctx context.Context, args ...string) (string, error) {
	cmd := exec.CommandContext(ctx, "sbatch", append([]string{"--parsable"}, args...)...)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	text, err := cmd.Output()
	if err != nil {
		return "", fmt.Errorf("sbatch: %w: %s", err, strings.TrimSpace(stderr.String()))
	}
	job, _, _ := strings.Cut(strings.TrimSpace(string(text)), ";") // the cluster's name may follow
	return job, nil
}

// quoteShell returns a word that a shell takes as it is.
func quoteShell(s string) string { return "'" + strings.ReplaceAll(s, "'", `'\''`) + "'" }

// jobName keeps of a name what engines take in the name of a job.
func jobName(s string) string { return notWord.ReplaceAllString(s, "-") }

var notWord = regexp.MustCompile(`[^A-Za-z0-9_.-]+`)
