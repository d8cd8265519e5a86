package bandwidth_test

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv"
)

func column(t testing.TB, file, name string) []float64 {
	t.Helper()
	f, err := os.Open("../testdata/events/" + file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var out []float64
	for i, h := range rows[0] {
		if h == name {
			for _, r := range rows[1:] {
				v, err := strconv.ParseFloat(r[i], 64)
				if err != nil {
					t.Fatal(err)
				}
				out = append(out, v)
			}
		}
	}
	if len(out) == 0 {
		t.Fatalf("%s has no column %s", file, name)
	}
	return out
}

// eventsOf bins two columns finely and transforms them. The columns are
// divided by their units, so that one square lattice serves both, and the
// results multiplied back.
func eventsOf(t testing.TB, x, y []float64, unitX, unitY float64) bandwidth.Events {
	t.Helper()
	sx, sy := make([]float64, len(x)), make([]float64, len(y))
	for i := range x {
		sx[i], sy[i] = x[i]/unitX, y[i]/unitY
	}
	ta, err := mv.NewTally(mv.TallyOptions{Grain: -20, Finest: -5, Tiles: 1 << 14})
	if err != nil {
		t.Fatal(err)
	}
	if err := ta.Add(sx, sy, nil); err != nil {
		t.Fatal(err)
	}
	lo, hi := ta.Bounds()
	g, err := ta.Grid(lo, hi, false)
	if err != nil {
		t.Fatal(err)
	}
	n := float64(len(x))
	_, cov, err := g.Moments(n)
	if err != nil {
		t.Fatal(err)
	}
	reach := []float64{9 * math.Sqrt(cov[0]), 9 * math.Sqrt(cov[3])}
	s, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: reach, Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	return bandwidth.Events{Spectrum: s, Covariance: cov, Counts: g}
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if math.Abs(got-want) > rel*math.Abs(want) {
		t.Errorf("%s = %.10g, want %.10g (relative error %.2g, allowed %.2g)", what, got, want, math.Abs(got/want-1), rel)
	}
}

// Two-stage plug-in on the quakes (long, lat), unconstrained pilots, one common
// scale. Values computed for the design by direct double sums (two routes).
func TestPlugInQuakes(t *testing.T) {
	e := eventsOf(t, column(t, "fiji-quakes.csv", "long"), column(t, "fiji-quakes.csv", "lat"), 1, 1)
	c, err := bandwidth.PlugIn(e, bandwidth.Full, 2)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "H11", c.Matrix.At(0, 0), 0.45058686, 2e-4)
	near(t, "H12", c.Matrix.At(0, 1), -0.07526948, 2e-3)
	near(t, "H22", c.Matrix.At(1, 1), 0.85146365, 2e-4)
	for i, want := range []float64{0.00046384861633, 3.185065501572e-05, 0.0001025911680079, 3.155342118397e-05, 0.000132496253981} {
		near(t, "psi4", c.Pilots[1].Psi[i], want, 1e-3)
	}
	near(t, "bias part over variance part", c.Bias2/c.Variance, 0.5, 1e-5)
	nr, err := bandwidth.NormalReference(e, bandwidth.Full)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "reference H11", nr.Matrix.At(0, 0), 3.68387911, 1e-5)
	near(t, "reference H12", nr.Matrix.At(0, 1), -1.11266969, 1e-5)
	near(t, "reference H22", nr.Matrix.At(1, 1), 2.52887377, 1e-5)
}
