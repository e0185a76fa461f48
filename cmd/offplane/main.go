// Command offplane holds coronal field maps against a corona that is known: it makes
// the data of a known corona, inverts them blind and reports how far off the maps are.
package main

import (
	"os"
	"runtime/debug"
)

func main() {
	// Most of the heap are a few large arrays without pointers: collecting it often costs
	// next to nothing and saves a third of the memory.
	if os.Getenv("GOGC") == "" {
		debug.SetGCPercent(20)
	}
	os.Exit(Main(os.Args[1:], os.Stdout, os.Stderr))
}
