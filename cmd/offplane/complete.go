package main

import (
	"strings"

	"github.com/spf13/cobra"

	"offplane/scenarios/strict"
)

// completeKeys makes a shell complete the keys of a document of that type behind --set.
func completeKeys(cmd *cobra.Command, document any) {
	completeFlag(cmd, "set", cobra.ShellCompDirectiveNoSpace|cobra.ShellCompDirectiveNoFileComp, func() []string {
		keys := strict.Paths(document)
		for i := range keys {
			keys[i] += "="
		}
		return keys
	})
}

// completeWords makes a shell complete one of these words behind a flag.
func completeWords(cmd *cobra.Command, flag string, words ...string) {
	completeFlag(cmd, flag, cobra.ShellCompDirectiveDefault, func() []string { return words })
}

func completeFlag(cmd *cobra.Command, flag string, how cobra.ShellCompDirective, words func() []string) {
	err := cmd.RegisterFlagCompletionFunc(flag, func(_ *cobra.Command, _ []string, begun string) ([]string, cobra.ShellCompDirective) {
		var fit []string
		for _, w := range words() {
			if strings.HasPrefix(w, begun) {
				fit = append(fit, w)
			}
		}
		return fit, how
	})
	if err != nil {
		panic("offplane: " + err.Error())
	}
}
