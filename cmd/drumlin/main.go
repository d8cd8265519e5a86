// Command drumlin maps where recorded events concentrate: see drumlin --help.
package main

import (
	"os"

	"drumlin/cmd/drumlin/internal/cli"
)

func main() {
	os.Exit(cli.Main(os.Args[1:], os.Stdout, os.Stderr))
}
