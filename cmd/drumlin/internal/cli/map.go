package cli

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/pipeline"
)

func (a *app) mapCommand() *cobra.Command {
	var file string
	c := &cobra.Command{
		Use:   "map INPUT... --out DIR",
		Short: "The main job: events in, regions, contours, peaks, surface and record out",
		Long: `map reads events, chooses a bandwidth matrix, and writes a folder:

  regions.geojson   the smallest regions that hold stated shares of events
  contours.geojson  bands of intensity, events per km2
  peaks.geojson     where intensity is highest, with error and smoothing bias
  zones.geojson     with --zones: expected and recorded events of named polygons
  surface.tif       the intensity on a lattice (GeoTIFF)
  report.html       one page for planners and reviewers
  run.json          what was run, on what, and how it was decided

An input is a Parquet, GeoParquet, Arrow or CSV file, plain or packed by gzip or zstd, a
folder of them, a quoted glob, or - for standard input; the format is told from
the content. Folders called key=value become columns. Several inputs make one
set of events.`,
		Example: `  drumlin map callouts.parquet --out map
  drumlin map 2025.csv 2026.csv --x easting --y northing --crs EPSG:3035 --out map
  drumlin map calls/ --where "kind = 'fire' AND year >= 2024" --out fires
  drumlin map calls.csv.gz --time received --from 2025-01-01 --until 2026-01-01 --zone Europe/Oslo --out map
  drumlin map callouts.parquet --study-area island.geojson --zones wards.geojson --out map
  drumlin map callouts.parquet --formats geoparquet,flatgeobuf,geotiff --out map
  DRUMLIN_MIN_EVENTS=20 drumlin map callouts.parquet --content 50,90 --out map`,
		Args: cobra.ArbitraryArgs,
		RunE: func(c *cobra.Command, args []string) error {
			s, err := config.Load(c.Flags(), file, args)
			if err != nil {
				return err
			}
			a.json = s.JSON
			if err := s.Validate(); err != nil {
				return err
			}
			_, err = a.runMap(c.Context(), s)
			return err
		},
	}
	config.MapFlags(c.Flags())
	c.Flags().StringVar(&file, "config", "", "settings file (YAML, TOML or JSON) with the names of the flags")
	return c
}

// runMap runs the pipeline and says what came out.
func (a *app) runMap(ctx context.Context, s *config.Settings) (*pipeline.Result, error) {
	report := a.reporter(s.Quiet, s.JSON)
	defer report.Close()
	res, err := pipeline.Map(ctx, s, report, time.Now)
	if err != nil {
		return nil, err
	}
	report.Close()
	if s.JSON {
		return res, a.printJSON(res, s.Out)
	}
	if !s.Quiet {
		pipeline.Describe(a.stdout, res)
		printFiles(a.stdout, s)
	}
	return res, nil
}

func (a *app) printJSON(res *pipeline.Result, out string) error {
	b, err := json.Marshal(map[string]any{
		"type": "done", "out": out, "rows": res.Record.Rows, "bandwidth": res.Record.Bandwidth, "guard": res.Record.Guard, "files": res.Record.Files,
	})
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(a.stdout, "%s\n", b)
	return err
}

func printFiles(w io.Writer, s *config.Settings) {
	for _, f := range s.Formats {
		if f == "geojson" {
			fmt.Fprintf(w, "\nOpen %s in a browser, %s in a GIS; the record of this run is %s.\n", filepath.Join(s.Out, "report.html"), filepath.Join(s.Out, "regions.geojson"), filepath.Join(s.Out, "run.json"))
			return
		}
	}
	fmt.Fprintf(w, "\nThe files are in %s; the record of this run is %s.\n", s.Out, filepath.Join(s.Out, "run.json"))
}
