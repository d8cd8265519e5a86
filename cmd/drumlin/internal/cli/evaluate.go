package cli

import (
	"encoding/json"
	"fmt"

	"github.com/spf13/cobra"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/pipeline"
)

func (a *app) evaluateCommand() *cobra.Command {
	var file string
	c := &cobra.Command{
		Use:   "evaluate INPUT... --columns a,b,c --at QUERY --out FILE",
		Short: "Density, standard error and smoothing bias at query rows, in any number of columns",
		Long: `evaluate estimates the density of the rows of INPUT over the named columns, plain
numbers without a CRS, and writes for every row of QUERY: the query's numeric
columns, then

  density            integrates to 1 over the columns
  standard_error     of the density, its leading term
  smoothing_bias     expectation minus truth, leading term; density less bias is
                     the debiased value
  gradient_<column>  with --gradient

FILE is Parquet, Arrow (IPC file) or CSV by its name. Query and result are read
and written piece by piece. A query row whose coordinates are absent or not
finite gets absent results (NaN in Parquet). Events whose coordinates are absent
or not finite are set aside and counted.

With another kernel than the Gaussian a chosen matrix is rescaled to smooth
alike; --matrix and --scale are those of the kernel itself. Errors of evaluation
are at most rtol times the density plus atol, whatever the plan.`,
		Example: `  drumlin evaluate events.parquet --columns x,y,depth --at places.csv --out density.csv
  drumlin evaluate a.csv b.csv --columns u --at u.parquet --out u.arrow --scale 0.4 --gradient`,
		Args: cobra.ArbitraryArgs,
		RunE: func(c *cobra.Command, args []string) error {
			s, err := config.LoadEvaluate(c.Flags(), file, args)
			if err != nil {
				return err
			}
			a.json = s.JSON
			if err := s.Validate(); err != nil {
				return err
			}
			report := a.reporter(s.Quiet, s.JSON)
			defer report.Close()
			res, err := pipeline.Evaluate(c.Context(), s, report)
			if err != nil {
				return err
			}
			report.Close()
			if s.JSON {
				b, err := json.Marshal(struct {
					Type string `json:"type"`
					Out  string `json:"out"`
					*pipeline.Evaluation
				}{"done", s.Out, res})
				if err != nil {
					return err
				}
				_, err = fmt.Fprintf(a.stdout, "%s\n", b)
				return err
			}
			if !s.Quiet {
				res.Describe(a.stdout)
				fmt.Fprintf(a.stdout, "Written to %s.\n", s.Out)
			}
			return nil
		},
	}
	config.EvaluateFlags(c.Flags())
	c.Flags().StringVar(&file, "config", "", "settings file (YAML, TOML or JSON) with the names of the flags")
	return c
}
