package main

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
)

// manualCommand writes the command tree as manual pages. It is part of the program and not
// one of its own because the tree is nowhere else.
func (p *program) manualCommand() *cobra.Command {
	var dir string
	cmd := &cobra.Command{
		Use:   "manual -o DIR",
		Short: "Write manual pages, one a command",
		Long: `manual writes a page of section 1 for every command into DIR, from the same text as
--help: for packages, or to be read with man -l.`,
		Example: `  offplane manual -o man && man -l man/offplane-run.1`,
		Args:    noArguments,
		Hidden:  true,
	}
	cmd.Flags().StringVarP(&dir, "output", "o", "", "`folder` for the pages; made if need be")
	cmd.RunE = do(func(context.Context, []string) error {
		if dir == "" {
			return misusef("offplane manual needs a folder for the pages: -o DIR")
		}
		if err := os.MkdirAll(dir, 0o777); err != nil {
			return unmade(err)
		}
		return writePages(&folder{dir: dir}, cmd.Root())
	})
	return cmd
}

// writePages writes the page of a command and those below it.
func writePages(to *folder, c *cobra.Command) error {
	if c.Hidden || c.IsAdditionalHelpTopicCommand() {
		return nil
	}
	if err := to.write(pageName(c)+".1", func(w io.Writer) error { _, err := w.Write(page(c)); return err }); err != nil {
		return err
	}
	for _, below := range c.Commands() {
		if err := writePages(to, below); err != nil {
			return err
		}
	}
	return nil
}

func pageName(c *cobra.Command) string { return strings.ReplaceAll(c.CommandPath(), " ", "-") }

// page is a command in the macros of man(7).
func page(c *cobra.Command) []byte {
	c.InitDefaultHelpFlag()
	var b bytes.Buffer
	fmt.Fprintf(&b, ".TH %s 1 \"\" %s\n.SH NAME\n%s \\- %s\n", strings.ToUpper(pageName(c)), quoteRoff("offplane "+version().Version), roff(pageName(c)), roff(c.Short))
	fmt.Fprintf(&b, ".SH SYNOPSIS\n.nf\n%s\n.fi\n", roff(c.UseLine()))
	if c.Long != "" {
		fmt.Fprintf(&b, ".SH DESCRIPTION\n.nf\n%s\n.fi\n", roff(c.Long))
	}
	flags := func(title string, set *pflag.FlagSet) {
		if !set.HasAvailableFlags() {
			return
		}
		fmt.Fprintf(&b, ".SH %s\n", title)
		set.VisitAll(func(f *pflag.Flag) {
			if !f.Hidden {
				b.WriteString(option(f))
			}
		})
	}
	flags("OPTIONS", c.NonInheritedFlags())
	flags("OPTIONS OF ALL COMMANDS", c.InheritedFlags())
	if c.Example != "" {
		fmt.Fprintf(&b, ".SH EXAMPLES\n.nf\n%s\n.fi\n", roff(c.Example))
	}
	if also := related(c); len(also) > 0 {
		fmt.Fprintf(&b, ".SH SEE ALSO\n%s\n", strings.Join(also, "\n"))
	}
	return b.Bytes()
}

// option is one flag with what it does.
func option(f *pflag.Flag) string {
	name := "--" + f.Name
	if f.Shorthand != "" {
		name = "-" + f.Shorthand + ", " + name
	}
	value, about := pflag.UnquoteUsage(f)
	if value != "" {
		name += " " + value
	}
	if d := f.DefValue; d != "" && d != "false" && d != "0" && d != "[]" {
		about += " (default " + d + ")"
	}
	return fmt.Sprintf(".TP\n\\fB%s\\fR\n%s\n", roff(name), roff(about))
}

// related names the commands above and below.
func related(c *cobra.Command) (names []string) {
	bold := func(c *cobra.Command) string { return ".BR " + roff(pageName(c)) + " (1)" }
	if c.HasParent() {
		names = append(names, bold(c.Parent()))
	}
	for _, below := range c.Commands() {
		if !below.Hidden && !below.IsAdditionalHelpTopicCommand() {
			names = append(names, bold(below))
		}
	}
	return names
}

// roff escapes text: backslashes, minus signs, and a dot or quote that begins a line.
func roff(text string) string {
	text = strings.NewReplacer(`\`, `\e`, "-", `\-`).Replace(strings.TrimRight(text, "\n"))
	lines := strings.Split(text, "\n")
	for i, l := range lines {
		if strings.HasPrefix(l, ".") || strings.HasPrefix(l, "'") {
			lines[i] = `\&` + l
		}
	}
	return strings.Join(lines, "\n")
}

func quoteRoff(text string) string { return `"` + strings.ReplaceAll(roff(text), `"`, `\(dq`) + `"` }
