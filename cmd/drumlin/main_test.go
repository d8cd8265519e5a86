package main_test

import (
	"os"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"

	"drumlin/cmd/drumlin/internal/cli"
)

// TestMain lets the scripts run this test binary as the program.
func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){
		"drumlin": func() { os.Exit(cli.Main(os.Args[1:], os.Stdout, os.Stderr)) },
	})
}
