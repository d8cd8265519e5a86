package cli

import (
	"fmt"

	"github.com/spf13/cobra"
)

func (a *app) demoCommand() *cobra.Command {
	return &cobra.Command{Use: "demo", RunE: func(*cobra.Command, []string) error { return fmt.Errorf("x") }}
}
