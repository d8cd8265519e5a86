// Command study runs the selectors on the target densities and writes a table:
// for each target, n and selector the mean, its standard error, the median and
// the worst ratio of integrated squared error to the exact minimal mean
// integrated squared error.
//
//	go run ./testdata/gen/study -n 1000 -replicates 200 -date 2026-12-01 -out testdata/reference/study_1000.csv
//	go run ./testdata/gen/study -plot testdata/reference/study.svg testdata/reference/study_*.csv
package main

import (
	"context"
	"encoding/csv"
	"flag"
	"fmt"
	"os"
	"strconv"
	"strings"

	"drumlin/bandwidth"
	"drumlin/mv/mvtest"
)

func main() {
	n := flag.Int("n", 1000, "events per replicate")
	replicates := flag.Int("replicates", 200, "replicates per target")
	seed := flag.Uint64("seed", 2026, "seed of the first target; each next one takes the next number")
	targets := flag.String("targets", "A,B,C,D,E,F,G,H,I,J,K,L,S1,S2,S3", "targets")
	least := flag.Int("least", 256, "least nodes along the longer axis")
	most := flag.Int("most", 1024, "most nodes along the longer axis")
	workers := flag.Int("workers", 2, "replicates at one time")
	date := flag.String("date", "", "date of the run, for the header")
	out := flag.String("out", "", "file to write")
	plot := flag.String("plot", "", "draw the tables named as arguments into this SVG file instead")
	flag.Parse()
	var err error
	if *plot != "" {
		err = draw(*plot, flag.Args())
	} else {
		err = study(*n, *replicates, *seed, strings.Split(*targets, ","), *least, *most, *workers, *date, *out)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "study:", err)
		os.Exit(1)
	}
}

func study(n, replicates int, seed uint64, targets []string, least, most, workers int, date, out string) (err error) {
	f, err := os.Create(out)
	if err != nil {
		return err
	}
	defer func() {
		if cerr := f.Close(); err == nil {
			err = cerr
		}
	}()
	fmt.Fprintf(f, "# ISE over exact minimal MISE; n %d; %d replicates per target (fewer where the replicates column says so); seeds %d on; date %s\n", n, replicates, seed, date)
	w := csv.NewWriter(f)
	if err := w.Write([]string{"target", "n", "selector", "replicates", "failed", "mean", "se", "median", "worst", "nodes_per_scale"}); err != nil {
		return err
	}
	for i, name := range targets {
		lab, err := bandwidth.NewLab(mvtest.Target(name), n, least, most)
		if err != nil {
			return fmt.Errorf("target %s: %w", name, err)
		}
		scores, err := lab.Run(context.Background(), seed+uint64(i), replicates, bandwidth.Entrants(), workers)
		if err != nil {
			return fmt.Errorf("target %s: %w", name, err)
		}
		for _, s := range scores {
			row := []string{name, strconv.Itoa(n), s.Entrant.Name, strconv.Itoa(s.Replicates), strconv.Itoa(s.Failed)}
			for _, v := range []float64{s.Mean, s.SE, s.Median, s.Worst, lab.StepsPerScale()} {
				row = append(row, strconv.FormatFloat(v, 'f', 3, 64))
			}
			if err := w.Write(row); err != nil {
				return err
			}
		}
		w.Flush()
		if err := w.Error(); err != nil {
			return err
		}
	}
	return nil
}
