package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"offplane/compare/ensemble"
	"offplane/synth/parallel"
)

func (p *program) ensembleCommand() *cobra.Command {
	return group("ensemble", "Many scenarios that differ in chosen parameters, here or on a cluster", p.ensembleList(), p.ensembleShow(), p.ensembleRun(), p.ensembleStatus(), p.ensembleGather(), p.ensembleSubmit())
}

func (p *program) ensembleList() *cobra.Command {
	cmd := &cobra.Command{Use: "list", Short: "List the embedded ensembles", Args: noArguments}
	cmd.RunE = do(func(context.Context, []string) error {
		t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', 0)
		for _, name := range ensemble.Names() {
			l, err := ensemble.Load(name)
			if err != nil {
				return err
			}
			fmt.Fprintf(t, "%s\t%s\n", name, l.About)
		}
		return t.Flush()
	})
	return cmd
}

func (p *program) ensembleShow() *cobra.Command {
	member := -1
	cmd := &cobra.Command{
		Use:               "show ENSEMBLE",
		Short:             "Print an ensemble as it was written, or the scenario of one member",
		Args:              argument("the name of an ensemble or a file"),
		ValidArgsFunction: cobra.FixedCompletions(ensemble.Names(), cobra.ShellCompDirectiveDefault),
	}
	cmd.RunE = do(func(_ context.Context, args []string) error {
		l, err := ensemble.Load(args[0])
		if err != nil {
			return misuse(err)
		}
		text, err := ensemble.Source(args[0])
		switch {
		case member >= l.Members || member < 0 && cmd.Flags().Changed("member"):
			return misusef("--member %d: the members are 0 to %d", member, l.Members-1)
		case member >= 0:
			s, _, err := l.Member(member)
			if err != nil {
				return err
			}
			text = s.Canonical
		case err != nil:
			text = l.Canonical
		}
		_, err = p.stdout.Write(text)
		return err
	})
	cmd.Flags().IntVar(&member, "member", -1, "print the resolved scenario of member `N`, from 0")
	return cmd
}

// members holds the flags that say which members are computed and which may be missing.
type members struct {
	work
	part        bool // one task only
	task, tasks int
	retry       bool
	accept      bool
	held        *folder
}

func (m *members) acceptFlag(cmd *cobra.Command) {
	cmd.Flags().BoolVar(&m.accept, "accept-failed", false, "gather although members failed; the table is told which")
}

func (p *program) ensembleRun() *cobra.Command {
	var m members
	cmd := &cobra.Command{
		Use:   "run ENSEMBLE -o DIR",
		Short: "Compute the members of an ensemble that are not there yet",
		Long: `run computes the members of an ensemble (the name of an embedded one, or a file), one
core each, and leaves in DIR

  ensemble.yaml   the ensemble with every default filled in; written first
  members/NNNNNN  a folder a member: member.fits, or FAILED with the reason
  members.ecsv    one row a member: parameters, counts, sums; written by gathering
  run.json        written last, when every member is there

Whatever stops it, the same command goes on: members that are whole stay. A member is
the same bytes wherever it is computed, so an ensemble may be shared out: --task N of
--tasks M computes members N, N+M, N+2M, ... and does not gather.`,
		Example: `  offplane ensemble run small -o small
  offplane ensemble run mine.yaml -o mine --task 3 --tasks 40
  offplane ensemble gather mine`,
		Args:              argument("the name of an ensemble or a file"),
		ValidArgsFunction: cobra.FixedCompletions(ensemble.Names(), cobra.ShellCompDirectiveDefault),
	}
	m.flags(cmd)
	m.acceptFlag(cmd)
	cmd.Flags().IntVar(&m.task, "task", 0, "compute the share of task `N` only, from 0")
	cmd.Flags().IntVar(&m.tasks, "tasks", 0, "`number` of tasks; 0: one a member")
	cmd.Flags().BoolVar(&m.retry, "retry-failed", false, "compute again what failed")
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		m.part = cmd.Flags().Changed("task")
		l, err := ensemble.Load(args[0])
		if err != nil {
			return misuse(err)
		}
		return p.runEnsemble(ctx, args[0], l, &m)
	})
	return cmd
}

func (p *program) runEnsemble(ctx context.Context, name string, l *ensemble.Loaded, m *members) error {
	r := newRecord("ensemble", p.args, m.out, parallel.Workers(m.workers))
	numbers, err := m.share(l)
	if err != nil {
		return err
	}
	if !m.part { // tasks share a folder
		held, err := p.hold(m.out, "ensemble", m.force)
		if err != nil {
			return err
		}
		defer held.abandon()
		m.held = held
	}
	if err := m.prepare(name, l); err != nil {
		return err
	}
	bar := newProgress(p.stderr, m.quiet, m.progress)
	defer bar.wipe()
	idle := false
	s := ensemble.Settings{Workers: m.workers, Version: version().Version, RetryFailed: m.retry, Progress: bar.stageFunc("members")}
	s.Begin = func(todo int, damaged []*ensemble.Damage) error {
		for _, d := range damaged {
			p.say("%v: it is computed again", d)
		}
		idle = todo == 0
		return m.reopen(todo)
	}
	if err := ensemble.Run(ctx, l, m.out, numbers, s); err != nil {
		return err
	}
	bar.wipe()
	r.stage("members")
	switch {
	case m.part:
	case idle && exists(filepath.Join(m.out, recordName)) && exists(filepath.Join(m.out, membersFile)):
		if !m.quiet && !m.json {
			p.say("%s is complete: there is nothing to do", m.out)
		}
		return p.told(m)
	default:
		m.held.abandon() // gathering takes it for itself
		return p.gather(ctx, m, r)
	}
	set, err := ensemble.Open(m.out)
	if err != nil {
		return err
	}
	return failures(set, numbers)
}

// share returns the members to compute.
func (m *members) share(l *ensemble.Loaded) ([]int, error) {
	switch {
	case m.out == "":
		return nil, misusef("offplane ensemble run needs a folder for the results: -o DIR")
	case m.workers < 0:
		return nil, misusef("--workers %d: write 0 for all cores, or their number", m.workers)
	case !m.part && m.tasks != 0:
		return nil, misusef("--tasks goes with --task N")
	case m.tasks < 0:
		return nil, misusef("--tasks %d: write how many there are, or 0 for one a member", m.tasks)
	case !m.part:
		return l.Share(0, 1), nil
	}
	tasks := m.tasks
	if tasks == 0 {
		tasks = l.Members
	}
	if m.task < 0 || m.task >= tasks {
		return nil, misusef("--task %d: the tasks are 0 to %d", m.task, tasks-1)
	}
	return l.Share(m.task, tasks), nil
}

// prepare holds the folder against the ensemble. A task never clears it: others may be
// at work there.
func (m *members) prepare(name string, l *ensemble.Loaded) error {
	if m.force && m.part {
		return misusef("--force does not go with --task: other tasks may be at work in %s", m.out)
	}
	own := filepath.Join(m.out, ensemble.Entries[0])
	switch {
	case m.force && sameFile(name, own):
		return misusef("%s would be read and written: choose another folder", name)
	case m.force:
		if err := clearEnsemble(m.out); err != nil {
			return err
		}
	case !exists(own) && exists(filepath.Join(m.out, recordName)):
		return (&folder{dir: m.out}).complete()
	}
	err := ensemble.Prepare(l, m.out)
	switch {
	case errors.Is(err, ensemble.ErrOther):
		return misusef("%w: choose another folder, or write over it with --force", err)
	case err != nil:
		return unmade(err)
	}
	return nil
}

// reopen takes the record away if members are to be computed: from then on the folder is
// not complete.
func (m *members) reopen(todo int) error {
	if todo == 0 {
		return nil
	}
	return os.RemoveAll(filepath.Join(m.out, recordName))
}

// clearEnsemble takes away what run and gather leave; the record first, so that the
// folder is not complete from then on.
func clearEnsemble(dir string) error {
	other := recorded(filepath.Join(dir, recordName))
	for _, name := range slices.Concat([]string{recordName, membersFile}, ensemble.Entries, other) {
		if err := os.RemoveAll(filepath.Join(dir, name)); err != nil {
			return err
		}
	}
	return nil
}

// failures returns an error if some of these members failed.
func failures(set *ensemble.Set, numbers []int) error {
	asked := map[int]bool{}
	for _, i := range numbers {
		asked[i] = true
	}
	var failed []int
	for _, i := range set.Failed {
		if asked[i] {
			failed = append(failed, i)
		}
	}
	if len(failed) == 0 {
		return nil
	}
	return fmt.Errorf("%d of %d members failed; member %d: %s (compute them again with --retry-failed, or go without them with gather --accept-failed)",
		len(failed), len(numbers), failed[0], strings.TrimSpace(set.Reason(failed[0])))
}

func (p *program) ensembleStatus() *cobra.Command {
	var json bool
	cmd := &cobra.Command{
		Use:   "status DIR",
		Short: "Say how many members of an ensemble are there, failed, missing",
		Args:  argument("the folder of an ensemble"),
	}
	cmd.RunE = do(func(_ context.Context, args []string) error {
		set, err := ensemble.Open(args[0])
		if err != nil {
			return misuse(err)
		}
		return p.printStatus(set, json)
	})
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document")
	return cmd
}

// printStatus tells how far an ensemble is.
func (p *program) printStatus(set *ensemble.Set, json bool) error {
	gathered := exists(filepath.Join(set.Dir, recordName)) && len(set.Missing) == 0
	damaged := []int{}
	for _, d := range set.Damaged {
		damaged = append(damaged, d.Number)
	}
	if json {
		return writeJSON(p.stdout, struct {
			Schema   int    `json:"schema"`
			SHA256   string `json:"ensemble_sha256"`
			Members  int    `json:"members"`
			Done     int    `json:"done"`
			Failed   []int  `json:"failed"`
			Missing  []int  `json:"missing"`
			Damaged  []int  `json:"damaged"` // among the missing
			Gathered bool   `json:"gathered"`
		}{1, set.Ensemble.SHA256, set.Ensemble.Members, len(set.Done), notNull(set.Failed), notNull(set.Missing), damaged, gathered})
	}
	fmt.Fprintf(p.stdout, "members  %d\ndone     %d\nfailed   %d\nmissing  %d\n", set.Ensemble.Members, len(set.Done), len(set.Failed), len(set.Missing))
	for _, i := range set.Failed {
		fmt.Fprintf(p.stdout, "%d: %s\n", i, strings.TrimSpace(set.Reason(i)))
	}
	for _, d := range set.Damaged {
		fmt.Fprintf(p.stdout, "%d: damaged, counts as missing: %v\n", d.Number, d)
	}
	if gathered {
		fmt.Fprintln(p.stdout, "gathered")
	}
	return nil
}

// notNull is n, and [] rather than null in JSON.
func notNull(n []int) []int { return append([]int{}, n...) }

func (p *program) ensembleGather() *cobra.Command {
	var m members
	cmd := &cobra.Command{
		Use:   "gather DIR",
		Short: "Check that every member is there and whole, and write their index",
		Long: `gather reads every member, checks that all belong to the ensemble and were made by one
version of the program, and writes members.ecsv and run.json. Exit code 75 says that
members are missing: offplane ensemble run goes on with them.`,
		Args: argument("the folder of an ensemble"),
	}
	m.acceptFlag(cmd)
	cmd.Flags().BoolVar(&m.quiet, "quiet", false, "no results on standard output")
	cmd.Flags().BoolVar(&m.json, "json", false, "results on standard output as one JSON document")
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		m.out = args[0]
		return p.gather(ctx, &m, newRecord("ensemble", p.args, m.out, parallel.Workers(m.workers)))
	})
	return cmd
}

const membersFile = "members.ecsv"

// gather makes the folder complete; r was begun with the command.
func (p *program) gather(ctx context.Context, m *members, r *record) error {
	set, err := ensemble.Open(m.out)
	if err != nil {
		return misuse(err)
	}
	if len(set.Damaged) > 0 {
		return m.harmed(set.Damaged[0])
	}
	if n := len(set.Missing); n > 0 {
		return &fault{exitStopped, fmt.Errorf("%s: %d of %d members are missing, the first is %d; offplane ensemble run goes on with them", m.out, n, set.Ensemble.Members, set.Missing[0])}
	}
	if !m.accept {
		if err := failures(set, set.Ensemble.Share(0, 1)); err != nil {
			return err
		}
	}
	f, err := p.open(m.out, job{Command: "ensemble", SHA256: set.Ensemble.SHA256, files: []string{membersFile}}, true)
	if err != nil {
		return err
	}
	defer f.abandon()
	index, err := set.Index()
	var d *ensemble.Damage
	if errors.As(err, &d) {
		return m.harmed(d)
	}
	if err != nil {
		return err
	}
	if err := index.WriteFile(f.path(membersFile)); err != nil {
		return err
	}
	r.stage("gather")
	if err := f.finish(ctx, r); err != nil {
		return err
	}
	return p.told(m)
}

// harmed is the error of gathering a damaged member.
func (m *members) harmed(d *ensemble.Damage) error {
	return &fault{exitStopped, fmt.Errorf("%s: member %d is damaged: %w; offplane ensemble run makes it again", m.out, d.Number, d)}
}

// told prints what a complete folder holds.
func (p *program) told(m *members) error {
	set, err := ensemble.Open(m.out)
	if err != nil {
		return err
	}
	switch {
	case m.json:
		return p.printStatus(set, true)
	case !m.quiet:
		fmt.Fprintf(p.stdout, "members  %d, failed %d\nindex    %s\n", len(set.Done), len(set.Failed), filepath.Join(m.out, membersFile))
	}
	return nil
}
