package cli

import (
	"encoding/json"
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/pipeline"
)

func (a *app) bandwidthCommand() *cobra.Command {
	var file string
	c := &cobra.Command{
		Use:   "bandwidth INPUT...",
		Short: "All bandwidth selectors side by side, with their evidence",
		Long: `bandwidth reads events as map does and runs the bandwidth selectors on them. For
each it prints the matrix H in square metres, its ellipse (scales in metres, the
bearing of the long axis in degrees from north), the value of its own criterion,
the error that the plug-in functionals expect of every matrix (the integrated
squared error over that of the best row), the time it took, how its search
ended, and what else a reviewer should know.

Rows of repeated or rounded positions make cross-validation collapse; the table
says so and what was done instead. --stability draws new events from the
estimate itself and gives intervals for the ellipse.`,
		Example: `  drumlin bandwidth callouts.parquet
  drumlin bandwidth callouts.parquet --json --stability 100
  drumlin bandwidth table.csv --x easting --y northing --crs plane --bandwidth lscv --shape diagonal`,
		Args: cobra.ArbitraryArgs,
		RunE: func(c *cobra.Command, args []string) error {
			s, err := config.LoadBandwidth(c.Flags(), file, args)
			if err != nil {
				return err
			}
			a.json = s.JSON
			if err := s.Validate(); err != nil {
				return err
			}
			report := a.reporter(s.Quiet, s.JSON)
			defer report.Close()
			table, err := pipeline.Bandwidths(c.Context(), s, report, time.Now)
			if err != nil {
				return err
			}
			report.Close()
			if s.JSON {
				b, err := json.Marshal(table)
				if err != nil {
					return err
				}
				_, err = fmt.Fprintf(a.stdout, "%s\n", b)
				return err
			}
			table.Print(a.stdout)
			return nil
		},
	}
	config.BandwidthFlags(c.Flags())
	c.Flags().StringVar(&file, "config", "", "settings file (YAML, TOML or JSON) with the names of the flags")
	return c
}
