package pipeline

import (
	"context"
	"errors"
	"io"
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"sync"
	"testing"
	"time"

	"github.com/spf13/pflag"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/io/events"
	"drumlin/mv"
)

// estimated runs a set of events as far as the estimate, and returns the events
// on its plane besides.
func estimated(t *testing.T, name string, flags map[string]string) (e *Estimate, x, y []float64) {
	t.Helper()
	ctx := context.Background()
	fs := pflag.NewFlagSet("map", pflag.ContinueOnError)
	config.MapFlags(fs)
	for k, v := range flags {
		if err := fs.Set(k, v); err != nil {
			t.Fatal(err)
		}
	}
	file := filepath.Join("..", "..", "..", "..", "testdata", "events", name)
	s, err := config.Load(fs, "", []string{file})
	if err != nil {
		t.Fatal(err)
	}
	report := progress.New(io.Discard, progress.Silent)
	defer report.Close()
	r := &run{settings: s, report: report, clock: time.Now, workers: 2}
	if r.sources, err = openAll(t.Context(), s.Inputs); err != nil {
		t.Fatal(err)
	}
	defer closeAll(r.sources)
	in, err := resolve(s, r.sources)
	if err != nil {
		t.Fatal(err)
	}
	w := &pool{workers: r.workers, report: report}
	if err := in.choosePlane(ctx, s, r.sources, w); err != nil {
		t.Fatal(err)
	}
	sel, err := r.selection()
	if err != nil {
		t.Fatal(err)
	}
	opt := r.tallyOptions(in)
	for pass := 1; e == nil; pass++ {
		c, err := in.count(ctx, r.sources, w, opt)
		if err != nil {
			t.Fatal(err)
		}
		c.tally.TrimStrays()
		if n := c.tally.Outside(); n != 0 {
			t.Fatalf("%d events left out", n)
		}
		m := &estimator{tally: c.tally, sel: sel, nodes: s.Nodes(), workers: r.workers, canRepeat: pass < mostPasses, progress: report.Stage}
		var finer *finerNeeded
		if e, err = m.estimate(ctx); errors.As(err, &finer) {
			opt.Finest, opt.Tiles, opt.Box = max(finer.Level, opt.Grain+6), finerTiles, &finer.Box
			e = nil
		} else if err != nil {
			t.Fatal(err)
		}
	}
	var mu sync.Mutex
	err = w.each(ctx, r.sources, in.columns(), nil, func(_, _ int, b events.Batch) error {
		mu.Lock()
		defer mu.Unlock()
		var a events.Account
		screen := in.screen()
		n := screen.Apply(b, &a)
		p := in.project(slices.Clone(b.Columns[0][:n]), slices.Clone(b.Columns[1][:n]))
		x, y = append(x, p.X...), append(y, p.Y...)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return e, x, y
}

// TestDensityAgainstDirectSums compares the density on the lattice with one
// kernel an event, summed: at nodes drawn over the whole lattice, at those
// nearest to the events and at the highest one. The tolerance, 1e-4 of the
// greatest density, is what a map of eight or a hundred bands cannot show. The
// geyser's 272 eruptions have one axis ten times as long as the other, so that
// the finest lattice has 6 steps per minor scale: 5e-4.
func TestDensityAgainstDirectSums(t *testing.T) {
	if testing.Short() {
		t.Skip("direct sums are left out with -short")
	}
	for _, c := range []struct {
		name      string
		tolerance float64
		flags     map[string]string
	}{
		{"fiji-quakes.parquet", 1e-4, map[string]string{"x": "long", "y": "lat", "crs": "EPSG:4326"}},
		{"us-airports.parquet", 1e-4, nil},
		{"us-airports.parquet", 1e-4, map[string]string{"shape": "diagonal"}},
		{"us-airports.parquet", 1e-4, map[string]string{"work-crs": "EPSG:5070"}},
		{"faithful.csv", 5e-4, map[string]string{"x": "eruptions", "y": "waiting", "crs": "plane", "bandwidth": "normal-reference"}},
	} {
		e, x, y := estimated(t, c.name, c.flags)
		if float64(len(x)) != e.Events {
			t.Fatalf("%s: %d events, the estimate has %g", c.name, len(x), e.Events)
		}
		sample, err := mv.NewSample([][]float64{x, y}, nil)
		if err != nil {
			t.Fatal(err)
		}
		direct, err := mv.NewDirect(sample, mv.Gaussian, e.Choice.Matrix, mv.EvalOptions{})
		if err != nil {
			t.Fatal(err)
		}
		g := e.Density
		r := rand.New(rand.NewPCG(3, 14))
		var nodes []int
		for range 3000 {
			nodes = append(nodes, r.IntN(g.Len()))
		}
		for i := range x {
			k := int(math.Round((x[i] - g.Origin[0]) / g.Step[0]))
			l := int(math.Round((y[i] - g.Origin[1]) / g.Step[1]))
			nodes = append(nodes, l*g.N[0]+k)
		}
		top := slices.Max(g.Values)
		nodes = append(nodes, slices.Index(g.Values, top))
		queries := [][]float64{make([]float64, len(nodes)), make([]float64, len(nodes))}
		for i, n := range nodes {
			queries[0][i], queries[1][i] = g.Coord(0, n%g.N[0]), g.Coord(1, n/g.N[0])
		}
		want := make([]float64, len(nodes))
		if err := direct.Density(context.Background(), want, queries); err != nil {
			t.Fatal(err)
		}
		var worst float64
		for i, n := range nodes {
			worst = max(worst, math.Abs(g.Values[n]-want[i]))
		}
		t.Logf("%s %v: worst error %.2g of the maximum at %d nodes; expected %.2g; %.3g steps per minor scale", c.name, c.flags, worst/top, len(nodes), e.LatticeError, e.StepsPerScale)
		if worst > c.tolerance*top {
			t.Errorf("%s %v: worst error %g of the maximum", c.name, c.flags, worst/top)
		}

		// The density holds all the probability, the counts all the events.
		var mass, counts float64
		for i, v := range g.Values {
			if v < 0 || v-v != 0 {
				t.Fatalf("%s: density %g", c.name, v)
			}
			mass += v * g.Step[0] * g.Step[1]
			counts += e.Counts.Values[i]
		}
		if math.Abs(mass-1) > 1e-4 {
			t.Errorf("%s: the density's mass is %.7f", c.name, mass)
		}
		if math.Abs(counts-e.Events) > 1e-9*e.Events {
			t.Errorf("%s: the nodes hold %.12g events of %g", c.name, counts, e.Events)
		}
	}
}
