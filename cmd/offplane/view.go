package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"offplane/cmd/offplane/view"
)

func (p *program) viewCommand() *cobra.Command {
	var port, workers int
	cmd := &cobra.Command{
		Use:   "view DIR",
		Short: "Show a run in a page on this machine",
		Long: `view takes the folder that run left, prints the address of a page and answers it until
it is interrupted. The page shows true and inferred maps with one cursor; a click on a pixel,
or Enter, shows what explain tells of it, with its curves; a region has its statistics.

Only this machine can reach the page, and only who knows its address, which is new each
time. Nothing is written, and nothing outside the folder is served.`,
		Example: `  offplane view out`,
		Args:    argument("the folder of a run"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		if port < 0 || port > 65535 {
			return misusef("--port %d: write a number from 0, any free one, to 65535", port)
		}
		s, err := view.Listen(ctx, args[0], args[0], port, workers)
		if err != nil {
			return misuse(err)
		}
		p.doubt(mapsOf(args[0])...)
		fmt.Fprintln(p.stdout, s.URL())
		p.say("open the address above in a browser; Ctrl-C ends")
		return s.Serve(ctx)
	})
	cmd.Flags().IntVar(&port, "port", 0, "`port` to listen on; 0: any free one")
	cmd.Flags().IntVar(&workers, "workers", 0, "cores to use; 0: all")
	return cmd
}
