package pipeline

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/paulmach/orb"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/io/events"
	"drumlin/mv"
	"drumlin/spatial"
)

// uniform is an estimate from evenly spread events in a study area, in metres.
func uniform(t *testing.T, shape orb.MultiPolygon, form string, n int, h [3]float64) *Estimate {
	t.Helper()
	plane, err := spatial.NewProjection(spatial.CRS{Method: "plane"})
	if err != nil {
		t.Fatal(err)
	}
	a := &areaFile{path: "area", shape: shape}
	if err := a.onPlane(plane); err != nil {
		t.Fatal(err)
	}
	lo, hi := a.plane.Bounds()
	rng := rand.New(rand.NewPCG(4, 4))
	var x, y []float64
	for len(x) < n {
		p := spatial.XY{X: lo.X + rng.Float64()*(hi.X-lo.X), Y: lo.Y + rng.Float64()*(hi.Y-lo.Y)}
		if a.plane.Contains(p) {
			x, y = append(x, p.X), append(y, p.Y)
		}
	}
	ta, err := mv.NewTally(mv.TallyOptions{Grain: -6})
	if err != nil {
		t.Fatal(err)
	}
	if err := ta.Add(x, y, nil); err != nil {
		t.Fatal(err)
	}
	fixed, err := mv.NewBandwidthMatrix(2, []float64{h[0], h[1], h[1], h[2]})
	if err != nil {
		t.Fatal(err)
	}
	m := &estimator{tally: ta, sel: Selection{Method: "fixed", Fixed: fixed}, nodes: 256, workers: 2,
		progress: func(string) {}, edge: edge{area: a.plane, form: form}}
	e, err := m.estimate(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func ring(xy ...float64) orb.Ring {
	var r orb.Ring
	for i := 0; i < len(xy); i += 2 {
		r = append(r, orb.Point{xy[i], xy[i+1]})
	}
	return append(r, r[0])
}

// Evenly spread events on a square, and on an L with a hole: the renormalised
// density is flat to the corners within Monte Carlo error, the event-side form
// holds all the mass, and without correction the loss is what the kernel mass
// says.
func TestEdgeCorrectionOfUniformEvents(t *testing.T) {
	n := 400_000
	if testing.Short() {
		n = 100_000
	}
	square := orb.MultiPolygon{{ring(0, 0, 4000, 0, 4000, 4000, 0, 4000)}}
	lHole := orb.MultiPolygon{{ring(0, 0, 4000, 0, 4000, 2000, 2000, 2000, 2000, 4000, 0, 4000), ring(500, 500, 500, 1200, 1200, 1200, 1200, 500)}}
	for name, shape := range map[string]orb.MultiPolygon{"square": square, "L with a hole": lHole} {
		h := [3]float64{160 * 160, 6000, 130 * 130}
		e := uniform(t, shape, "renormalise", n, h)
		w := e.Edge.area
		var z2, worst, nodes, rim, rimNodes float64
		for i, f := range e.Density.Values {
			at := spatial.XY{X: e.Density.Coord(0, i%e.Density.N[0]), Y: e.Density.Coord(1, i/e.Density.N[0])}
			if !w.Contains(at) {
				continue
			}
			s := e.summit(at, 1/w.Area())
			z := (f - 1/w.Area()) / s.StandardError
			z2 += z * z
			worst = max(worst, math.Abs(z))
			nodes++
			if s.Inside < .6 {
				rim += f * w.Area()
				rimNodes++
			}
		}
		t.Logf("%s: z has mean square %.3f and is %.2f at worst; mean of the rim %.4f", name, z2/nodes, worst, rim/rimNodes)
		if z2/nodes < .6 || z2/nodes > 1.5 || worst > 5.5 || math.Abs(rim/rimNodes-1) > .01 {
			t.Errorf("%s: not flat", name)
		}
		c := uniform(t, shape, "conserve", n, h)
		if m := integral(c); math.Abs(m-1) > 2e-5 {
			t.Errorf("%s: conserved mass %.8f", name, m)
		}
		u := uniform(t, shape, "none", n, h)
		var lost float64 // p at the events, from their nodes
		for i, k := range e.Counts.Values {
			lost += k * e.Inside.Values[i] / float64(n)
		}
		if m := integral(u); math.Abs(m-lost) > 1e-3 {
			t.Errorf("%s: uncorrected mass %.5f, mean kernel mass inside %.5f", name, m, lost)
		}
	}
}

func integral(e *Estimate) float64 { return e.Edge.area.MassInside(e.Density) }

func TestReadAreaRefuses(t *testing.T) {
	if _, err := readArea("/no/such/file", false); err == nil || !errors.Is(err, events.ErrMissing) {
		t.Errorf("missing file: %v", err)
	}
	s := config.Settings{Edge: "sideways"}
	if err := s.Validate(); err == nil {
		t.Error("edge sideways passes")
	}
}
