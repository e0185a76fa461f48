// Command offplane holds coronal field maps against a corona that is known: it makes
// the data of a known corona, inverts them blind and reports how far off the maps are.
package main

import "os"

func main() {
	os.Exit(Main(os.Args[1:], os.Stdout, os.Stderr))
}
