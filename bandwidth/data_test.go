package bandwidth_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv"
	"drumlin/mv/mvtest"
)

func rng(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 77)) }

// normal is the standard normal in d dimensions.
func normal(t testing.TB, d int) *mv.NormalMixture {
	t.Helper()
	id := make([]float64, d*d)
	for i := range d {
		id[i*d+i] = 1
	}
	m, err := mv.NewNormalMixture([]float64{1}, [][]float64{make([]float64, d)}, [][]float64{id})
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// moved maps points by y = A x + b.
func moved(cols [][]float64, a [4]float64, bx, by float64) [][]float64 {
	out := [][]float64{nil, nil}
	for i, x := range cols[0] {
		y := cols[1][i]
		out[0] = append(out[0], a[0]*x+a[1]*y+bx)
		out[1] = append(out[1], a[2]*x+a[3]*y+by)
	}
	return out
}

// Equivariance as METHODS.md 4.6 states it, for every selector, by direct sums:
// on the common scale to shifts, rotations, reflections and changes of unit;
// sphered to every linear map; prescaled to changes of unit per axis, and not to
// rotations. Tolerance 1e-4 of the scale: minima are flat.
func TestEquivariance(t *testing.T) {
	s, err := mvtest.Target("K").Sample(rng(3), 60)
	if err != nil {
		t.Fatal(err)
	}
	turn := 0.6
	sin, cos := math.Sincos(turn)
	rotation := [4]float64{300 * cos, -300 * sin, 300 * sin, 300 * cos}
	reflection := [4]float64{cos, sin, sin, -cos}
	linear := [4]float64{2, 1, -0.5, 3}
	axes := [4]float64{10, 0, 0, 0.1}
	type test struct {
		method string
		opt    bandwidth.Options
		maps   [][4]float64
	}
	var tests []test
	for _, m := range []string{"normal-reference", "plug-in", "scv", "lscv", "bcv", "likelihood-cv", "auto"} {
		tests = append(tests, test{m, bandwidth.Options{}, [][4]float64{rotation, reflection}})
		tests = append(tests, test{m, bandwidth.Options{Shape: bandwidth.Scalar}, [][4]float64{rotation}})
	}
	tests = append(tests,
		test{"normal-reference", bandwidth.Options{}, [][4]float64{linear}},
		test{"plug-in", bandwidth.Options{Frame: bandwidth.Sphered}, [][4]float64{linear, rotation}},
		test{"plug-in", bandwidth.Options{Frame: bandwidth.Sphered, ScalarPilots: true}, [][4]float64{linear}},
		test{"scv", bandwidth.Options{Frame: bandwidth.Sphered}, [][4]float64{linear}},
		test{"lscv", bandwidth.Options{Frame: bandwidth.Sphered}, [][4]float64{linear}},
		test{"bcv", bandwidth.Options{Frame: bandwidth.Sphered}, [][4]float64{linear}},
		test{"plug-in", bandwidth.Options{Frame: bandwidth.Prescaled}, [][4]float64{axes}},
		test{"scv", bandwidth.Options{Frame: bandwidth.Prescaled}, [][4]float64{axes}},
	)
	for _, c := range tests {
		base, err := bandwidth.Select(bandwidth.FromSample(s, 2), c.method, c.opt)
		if err != nil && !errors.Is(err, bandwidth.ErrNoMinimum) {
			t.Fatal(err)
		}
		for _, a := range c.maps {
			got, gerr := bandwidth.Select(bandwidth.FromSample(sampleOf(t, moved(s.Columns(), a, 5, -7)...), 2), c.method, c.opt)
			if (err == nil) != (gerr == nil) {
				t.Errorf("%s %v: %v before the map, %v after", c.method, c.opt, err, gerr)
			}
			if err != nil || gerr != nil {
				continue
			}
			h := base.Matrix
			x := func(i, j int) float64 {
				var v float64
				for p := range 2 {
					for q := range 2 {
						v += a[i*2+p] * h.At(p, q) * a[j*2+q]
					}
				}
				return v
			}
			isMatrix(t, fmt.Sprintf("%s %s %s after %.3g", c.method, c.opt.Shape, c.opt.Frame, a), got.Matrix, x(0, 0), x(0, 1), x(1, 1), 1e-4)
		}
	}
}

// A rotation of a sample that is binned: the spectrum's selectors follow it up
// to the lattice.
func TestEquivarianceOnLattice(t *testing.T) {
	s, err := mvtest.Target("G").Sample(rng(4), 1000)
	if err != nil {
		t.Fatal(err)
	}
	sin, cos := math.Sincos(0.5)
	turned := moved(s.Columns(), [4]float64{cos, -sin, sin, cos}, 3, 1)
	for _, m := range []string{"auto", "plug-in", "scv", "lscv"} {
		a, err := bandwidth.Select(eventsOf(t, s.Columns()[0], s.Columns()[1], 1, 1), m, bandwidth.Options{})
		if err != nil {
			t.Fatal(err)
		}
		b, err := bandwidth.Select(eventsOf(t, turned[0], turned[1], 1, 1), m, bandwidth.Options{})
		if err != nil {
			t.Fatal(err)
		}
		p, q := a.Matrix.Ellipse(), b.Matrix.Ellipse()
		near(t, m+" major", q.Major, p.Major, 0.02)
		near(t, m+" minor", q.Minor, p.Minor, 0.02)
		if d := math.Abs(math.Remainder(q.Bearing-(p.Bearing-0.5*180/math.Pi), 180)); d > 2 {
			t.Errorf("%s: the bearing is off by %.3g degrees after a rotation", m, d)
		}
	}
}

// Limits of tied pairs, METHODS.md 4.2.
func TestTieLimit(t *testing.T) {
	near(t, "d=1", bandwidth.TieLimit(1), 0.27346, 1e-4)
	near(t, "d=2", bandwidth.TieLimit(2), 0.16667, 1e-4)
	near(t, "d=3", bandwidth.TieLimit(3), 0.10737, 1e-4)
}

// Geocoders stack events and round them. Past the limit least-squares
// cross-validation and the default must not shrink to the lattice: they take
// plug-in and say so. Data without ties, however clustered, must not trip it.
func TestTies(t *testing.T) {
	s, err := mvtest.Target("E").Sample(rng(5), 1000)
	if err != nil {
		t.Fatal(err)
	}
	smooth := eventsOf(t, s.Columns()[0], s.Columns()[1], 1, 1)
	plain, err := bandwidth.PlugIn(smooth, bandwidth.Full, 0)
	if err != nil {
		t.Fatal(err)
	}
	if ties := bandwidth.CountTies(smooth); ties.Ratio > 0.03 {
		t.Errorf("continuous data: %s", ties)
	}
	spread := func(name string, change func(i int, x, y float64) (float64, float64)) {
		t.Helper()
		cols := [][]float64{nil, nil}
		for i := range s.Len() {
			x, y := change(i, s.At(i, 0), s.At(i, 1))
			cols[0], cols[1] = append(cols[0], x), append(cols[1], y)
		}
		e := eventsOf(t, cols[0], cols[1], 1, 1)
		ties := bandwidth.CountTies(e)
		same := map[[2]float64]float64{}
		for i, x := range cols[0] {
			same[[2]float64{x, cols[1][i]}]++
		}
		var tied float64
		for _, k := range same {
			tied += k * (k - 1) / 2 / float64(s.Len())
		}
		if !ties.PastLimit() || ties.Axis == 0 && (ties.Ratio < 0.75*tied || ties.Ratio > 1.25*tied) {
			t.Errorf("%s: %s; there are %.3g pairs per event", name, ties, tied)
		}
		for _, m := range []string{"lscv", "auto"} {
			c, err := bandwidth.Select(e, m, bandwidth.Options{})
			if err != nil {
				t.Fatal(err)
			}
			if got, want := c.Matrix.SqrtDet(), plain.Matrix.SqrtDet(); got < want/3 {
				t.Errorf("%s: %s shrinks to %s (%.3g of plug-in on the same events before)", name, m, c.Matrix, got/want)
			}
			if len(c.Notes) == 0 || !strings.Contains(c.Notes[0], "plug-in") || !strings.Contains(c.Notes[0], "pairs") {
				t.Errorf("%s: %s does not say what was done instead: %q", name, m, c.Notes)
			}
		}
	}
	// Every second event stands on the one before: half a pair per event.
	var px, py float64
	spread("pairs", func(i int, x, y float64) (float64, float64) {
		if i%2 == 1 {
			return px, py
		}
		px, py = x, y
		return x, y
	})
	spread("rounded", func(_ int, x, y float64) (float64, float64) {
		return math.Round(x/0.13) * 0.13, math.Round(y/0.13) * 0.13
	})
}

// A few huge weights leave few events' worth of evidence, a line leaves none;
// a far outlier must not ruin the default.
func TestHostileData(t *testing.T) {
	s, err := mvtest.Target("E").Sample(rng(6), 500)
	if err != nil {
		t.Fatal(err)
	}
	w := make([]float64, 500)
	for i := range w {
		w[i] = 1
	}
	w[3], w[200] = 1e6, 1e6
	heavy, err := mv.NewSample(s.Columns(), w)
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range bandwidth.Methods() {
		if _, err := bandwidth.Select(bandwidth.FromSample(heavy, 1), m, bandwidth.Options{}); !errors.Is(err, mv.ErrDegenerate) {
			t.Errorf("%s with two huge weights: %v; two events' worth is too little", m, err)
		}
	}
	line := [][]float64{nil, nil}
	for i := range 500 {
		line[0] = append(line[0], s.At(i, 0))
		line[1] = append(line[1], 2*s.At(i, 0)+1e-6*s.At(i, 1))
	}
	for _, m := range bandwidth.Methods() {
		if _, err := bandwidth.Select(bandwidth.FromSample(sampleOf(t, line...), 1), m, bandwidth.Options{}); !errors.Is(err, mv.ErrDegenerate) {
			t.Errorf("%s on a line: %v", m, err)
		}
	}
	clean, err := bandwidth.Auto(eventsOf(t, s.Columns()[0], s.Columns()[1], 1, 1), bandwidth.Options{})
	if err != nil {
		t.Fatal(err)
	}
	x, y := append([]float64(nil), s.Columns()[0]...), append([]float64(nil), s.Columns()[1]...)
	x[0], y[0], x[1], y[1] = 14, 15, -16, 13
	dirty, err := bandwidth.Auto(eventsOf(t, x, y, 1, 1), bandwidth.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if r := dirty.Matrix.SqrtDet() / clean.Matrix.SqrtDet(); r < 0.5 || r > 2 {
		t.Errorf("two far outliers multiply the area of the default's ellipse by %.3g", r)
	}
}

// Likelihood cross-validation names the events that widen its matrix.
func TestLikelihoodNamesIsolatedEvents(t *testing.T) {
	s, err := mvtest.Target("A").Sample(rng(7), 150)
	if err != nil {
		t.Fatal(err)
	}
	x, y := append([]float64(nil), s.Columns()[0]...), append([]float64(nil), s.Columns()[1]...)
	x[9], y[9] = 11, -12
	c, err := bandwidth.LikelihoodCrossValidation(bandwidth.FromSample(sampleOf(t, x, y), 1), bandwidth.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Isolated) == 0 || !slices.ContainsFunc(c.Isolated, func(at []float64) bool { return at[0] == 11 && at[1] == -12 }) {
		t.Errorf("isolated events %v lack (11, -12)", c.Isolated)
	}
	if len(c.Notes) == 0 || !strings.Contains(c.Notes[0], "stand alone") || strings.Contains(strings.Join(c.Notes, " "), "-12") {
		t.Errorf("notes %q: they go into records and must tell of isolated events without their places", c.Notes)
	}
}

// A sub-sample is drawn the same way every time, and the note says what was
// done; the matrix is that of all events within what 2,000 of 6,000 can tell.
func TestSubSample(t *testing.T) {
	if testing.Short() {
		t.Skip("direct sums on 2,000 events")
	}
	s, err := mvtest.Target("B").Sample(rng(8), 6000)
	if err != nil {
		t.Fatal(err)
	}
	e := bandwidth.FromSample(s, 2)
	c, err := bandwidth.PlugInBy(e, bandwidth.Options{Stages: 2})
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Notes) == 0 || !strings.Contains(c.Notes[0], "2000 of 6000") {
		t.Errorf("notes %q do not name the sub-sample", c.Notes)
	}
	all, err := bandwidth.PlugIn(eventsOf(t, s.Columns()[0], s.Columns()[1], 1, 1), bandwidth.Full, 2)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "area of the ellipse", c.Matrix.SqrtDet(), all.Matrix.SqrtDet(), 0.1)
}

// The smoothed bootstrap: the same intervals for any number of workers, around
// the choice, narrower for more events.
func TestBootstrap(t *testing.T) {
	width := map[int]float64{}
	for _, n := range []int{300, 3000} {
		s, err := mvtest.Target("B").Sample(rng(9), n)
		if err != nil {
			t.Fatal(err)
		}
		e := eventsOf(t, s.Columns()[0], s.Columns()[1], 1, 1)
		opt := bandwidth.BootstrapOptions{Method: "plug-in", Replicates: 24, Seed: 4, Workers: 2}
		b, err := bandwidth.Bootstrap(t.Context(), e, opt)
		if err != nil {
			t.Fatal(err)
		}
		iv := b.Intervals()
		if n == 300 {
			opt.Workers = 1
			again, err := bandwidth.Bootstrap(t.Context(), e, opt)
			if err != nil {
				t.Fatal(err)
			}
			if again.Intervals() != iv {
				t.Errorf("intervals depend on the workers: %v, %v", again.Intervals(), iv)
			}
		}
		width[n] = (iv.Major[2] - iv.Major[0]) / iv.Major[1]
		// Draws come from the estimate, whose variance is S + H: a little wider.
		if c := b.Choice.Matrix.Ellipse(); iv.Major[1] < 0.9*c.Major || iv.Major[1] > 1.4*c.Major {
			t.Errorf("n=%d: the median major scale is %g, the choice's %g", n, iv.Major[1], c.Major)
		}
		if iv.Bearing[0] > iv.Bearing[1] || iv.Bearing[1] > iv.Bearing[2] || math.Abs(iv.Bearing[1]-45) > 6 {
			t.Errorf("n=%d: bearings %v around 45 degrees", n, iv.Bearing)
		}
	}
	if width[3000] > 0.75*width[300] {
		t.Errorf("relative widths of the major scale's interval: %v; ten times the events should narrow it", width)
	}
}
