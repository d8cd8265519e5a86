package cli

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/demo"
	"drumlin/cmd/drumlin/internal/pipeline"
	"drumlin/io/bundle"
	"drumlin/io/parquetfile"
)

func (a *app) demoCommand() *cobra.Command {
	var out string
	var replace, quiet bool
	c := &cobra.Command{
		Use:   "demo --out DIR",
		Short: "Write an invented extract, map it, and say where its events concentrate",
		Long: `demo writes DIR/callouts.parquet, two years of invented call-outs on an island
that does not exist, and maps it into DIR/map. Nothing in it is real.`,
		Example: "  drumlin demo --out demo",
		Args:    cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			if out == "" {
				return fmt.Errorf("%w: out is missing; name the folder to write, for example --out demo", config.ErrSettings)
			}
			return a.runDemo(c.Context(), c, out, replace, quiet)
		},
	}
	c.Flags().StringVar(&out, "out", "", "folder to write")
	c.Flags().BoolVar(&replace, "replace", false, "replace an earlier demo")
	c.Flags().BoolVar(&quiet, "quiet", false, "no words, no progress")
	return c
}

func (a *app) runDemo(ctx context.Context, c *cobra.Command, out string, replace, quiet bool) error {
	if err := os.MkdirAll(out, 0o777); err != nil {
		return fmt.Errorf("the folder %s cannot be made: %w: %w", out, bundle.ErrOutput, err)
	}
	extract := filepath.Join(out, "callouts.parquet")
	err := bundle.WriteFile(ctx, extract, replace, func(w io.Writer) error {
		return parquetfile.Write(w, demo.Extract(demo.Seed), parquetfile.WriteOptions{RowGroupRows: 10000})
	})
	if err != nil {
		return err
	}
	defaults := &cobra.Command{}
	config.MapFlags(defaults.Flags())
	s, err := config.Load(defaults.Flags(), "", []string{extract})
	if err != nil {
		return err
	}
	s.Out, s.Replace, s.Quiet = filepath.Join(out, "map"), replace, quiet
	if err := s.Validate(); err != nil {
		return err
	}
	if !quiet {
		fmt.Fprintf(a.stdout, "An invented extract: two years of call-outs on the island of Skerrin, which does not exist.\nWritten to %s.\n\n", extract)
	}
	res, err := a.runMap(ctx, s)
	if err != nil || quiet {
		return err
	}
	describeDemo(a.stdout, res)
	return nil
}

// describeDemo names the invented places of the highest peaks.
func describeDemo(w io.Writer, res *pipeline.Result) {
	peaks := res.Release.Peaks()
	if len(peaks) == 0 {
		return
	}
	fmt.Fprintln(w, "In the words of the island: call-outs concentrate")
	told := map[string]bool{}
	for _, p := range peaks {
		name, metres := demo.Nearest(p.Position)
		if told[name] || len(told) == 3 {
			continue
		}
		told[name] = true
		fmt.Fprintf(w, "  %d. around %s (%.0f m from its middle), about %s a year on each square kilometre\n", p.Rank, name, metres, pipeline.Significant(math.Round(p.IntensityPerKM2/2)))
	}
}
