package cli

import (
	"encoding/json"
	"fmt"

	"github.com/spf13/cobra"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/pipeline"
)

func (a *app) surveyCommand() *cobra.Command {
	var file string
	c := &cobra.Command{
		Use:   "survey INPUT...",
		Short: "Say what is in an extract before anyone maps it",
		Long: `survey reads every row and tells what the columns hold, where the coordinates
lie, how many events share a position, how finely positions are given, which rows
look like mistakes, and what map would set aside and why.

It writes nothing but its answer. Where the tallest stacks of events stand is
said only with --places: they may point at people.

Memory does not grow with the rows: up to 524,288 distinct positions are held,
beyond that a sample of positions chosen by hash, and the answer says so.`,
		Example: `  drumlin survey callouts.parquet
  drumlin survey 'extracts/*.csv.gz' --json
  zcat calls.csv.gz | drumlin survey - --where "kind = 'fire'"`,
		Args: cobra.ArbitraryArgs,
		RunE: func(c *cobra.Command, args []string) error {
			s, err := config.Load(c.Flags(), file, args)
			if err != nil {
				return err
			}
			a.json = s.JSON
			if err := s.ValidateInput(); err != nil {
				return err
			}
			report := a.reporter(s.Quiet, s.JSON)
			defer report.Close()
			r, err := pipeline.Survey(c.Context(), s, report)
			if err != nil {
				return err
			}
			report.Close()
			if !s.JSON {
				return r.WriteText(a.stdout)
			}
			b, err := json.Marshal(r)
			if err != nil {
				return err
			}
			_, err = fmt.Fprintf(a.stdout, "%s\n", b)
			return err
		},
	}
	config.SurveyFlags(c.Flags())
	c.Flags().StringVar(&file, "config", "", "settings file (YAML, TOML or JSON) with the names of the flags")
	return c
}
