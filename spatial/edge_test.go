package spatial_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"

	"github.com/paulmach/orb"
)

// areaOf makes a study area on a plane without a place from rings of x, y.
func areaOf(t testing.TB, polygons ...[][]float64) *spatial.StudyArea {
	t.Helper()
	var mp orb.MultiPolygon
	for _, rings := range polygons {
		var p orb.Polygon
		for _, xy := range rings {
			var r orb.Ring
			for i := 0; i < len(xy); i += 2 {
				r = append(r, orb.Point{xy[i], xy[i+1]})
			}
			p = append(p, append(r, r[0]))
		}
		mp = append(mp, p)
	}
	plane, err := spatial.NewProjection(spatial.CRS{Method: "plane"})
	if err != nil {
		t.Fatal(err)
	}
	w, err := spatial.NewStudyArea(mp, plane)
	if err != nil {
		t.Fatal(err)
	}
	return w
}

var (
	unitSquare = [][]float64{{0, 0, 1, 0, 1, 1, 0, 1}}
	lShape     = [][]float64{{0, 0, 4, 0, 4, 1, 1, 1, 1, 3, 0, 3}}
	triangle   = [][]float64{{0, 0, 2, 0, 0, 2}}
	holed      = [][]float64{{0, 0, 3, 0, 3, 3, 0, 3}, {1, 1, 1, 2, 2, 2, 2, 1}}
)

// latticeOver covers lo to hi on both axes in steps, an integer number of them.
func latticeOver(lo, hi, step float64) mv.Lattice {
	n := int(math.Round((hi-lo)/step)) + 1
	return mv.Lattice{Origin: []float64{lo, lo}, Step: []float64{step, step}, N: []int{n, n}}
}

func matrixOf(t testing.TB, a, b, c float64) mv.BandwidthMatrix {
	t.Helper()
	h, err := mv.NewBandwidthMatrix(2, []float64{a, b, b, c})
	if err != nil {
		t.Fatal(err)
	}
	return h
}

func kernelMass(t testing.TB, w *spatial.StudyArea, l mv.Lattice, h mv.BandwidthMatrix) mv.Grid {
	t.Helper()
	p, err := w.KernelMass(l, 2, h)
	if err != nil {
		t.Fatal(err)
	}
	return p[0]
}

func TestMaskIsExact(t *testing.T) {
	for name, c := range map[string]struct {
		w    *spatial.StudyArea
		area float64
	}{"square": {areaOf(t, unitSquare), 1}, "L": {areaOf(t, lShape), 6}, "triangle": {areaOf(t, triangle), 2}, "holed": {areaOf(t, holed), 8}} {
		m := c.w.Mask(latticeOver(-1.03, 5.22, .0625))
		var sum float64
		for _, v := range m.Values {
			sum += v
		}
		nearly(t, name, sum, c.area, 1e-9)
		nearly(t, name, c.w.Area(), c.area, 1e-9)
	}
	// a lattice that the square reaches beyond
	m := areaOf(t, unitSquare).Mask(latticeOver(.25, .75, .125))
	for i, v := range m.Values {
		nearly(t, "inside", v, .125*.125, 1e-15)
		_ = i
	}
}

// METHODS.md section 6: the mass of the kernel inside.
func TestKernelMassAgainstClosedForms(t *testing.T) {
	h2 := [3]float64{.5, .2, .3}
	known := map[string]mv.Grid{}
	for _, c := range []struct {
		name       string
		w          *spatial.StudyArea
		h          [3]float64
		step       float64
		x, y, want float64
		tol        float64
	}{
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, .5, .5, 0.999998853394, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, 0, .5, 0.499999713348, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, 0, 0, .25, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, .05, .05, 0.478120335351, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, .1, .3, 0.840209016451, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .01}, 1. / 200, .02, .98, 0.335541810979, 1e-6},
		{"square", areaOf(t, unitSquare), [3]float64{.01, 0, .04}, 1. / 200, .05, .9, 0.478117985988, 1e-6},
		{"square, full", areaOf(t, unitSquare), [3]float64{.04, .018, .0225}, 1. / 100, .5, .5, 0.987010849077, 1e-6},
		{"square, full", areaOf(t, unitSquare), [3]float64{.04, .018, .0225}, 1. / 100, 0, 0, 0.352416095703, 1e-6},
		{"square, full", areaOf(t, unitSquare), [3]float64{.04, .018, .0225}, 1. / 100, 1, 0, 0.147583617634, 1e-6},
		{"square, full", areaOf(t, unitSquare), [3]float64{.04, .018, .0225}, 1. / 100, .1, .9, 0.456253866744, 1e-6},
		{"square, full", areaOf(t, unitSquare), [3]float64{.04, .018, .0225}, 1. / 100, .3, .2, 0.869611930840, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, .5, .5, 0.579594664591, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, 1, 1, 0.563904971119, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, 0, 0, 0.323499514788, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, 3.9, .9, 0.356976280345, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, 2, 2, 0.0972272350876, 1e-6},
		{"L", areaOf(t, lShape), h2, .05, .2, 2.8, 0.280358541255, 1e-6},
		{"triangle", areaOf(t, triangle), h2, .05, .5, .5, 0.492662078581, 1e-6},
		{"triangle", areaOf(t, triangle), h2, .05, 0, 0, 0.30245201683, 1e-6},
		{"triangle", areaOf(t, triangle), h2, .05, 1, 1, 0.400325982701, 1e-6},
		{"triangle", areaOf(t, triangle), h2, .05, 1.9, .05, 0.122766583556, 1e-6},
		{"holed", areaOf(t, holed), h2, .05, 1.5, 1.5, 0.597129573513, 1e-6},
		{"holed", areaOf(t, holed), h2, .05, .5, .5, 0.592406054757, 1e-6},
		{"holed", areaOf(t, holed), h2, .05, 1, 1, 0.647221310471, 1e-6},
	} {
		l := latticeOver(-1, 5, c.step)
		if c.step < .02 {
			l = latticeOver(-.25, 1.25, c.step)
		}
		key := fmt.Sprint(c.name, c.h)
		p, ok := known[key]
		if !ok {
			p = kernelMass(t, c.w, l, matrixOf(t, c.h[0], c.h[1], c.h[2]))
			known[key] = p
		}
		i, j := int(math.Round((c.x-l.Origin[0])/c.step)), int(math.Round((c.y-l.Origin[1])/c.step))
		nearly(t, c.name, p.Values[j*l.N[0]+i], c.want, c.tol)
	}
}

// METHODS.md section 6: the mean of p over the square, and a coarse lattice
// that is not aligned with the border.
func TestKernelMassMeanAndCoarse(t *testing.T) {
	w := areaOf(t, unitSquare)
	for _, c := range []struct{ h, want float64 }{{.05, 0.921803093351}, {.1, 0.846789285563}, {.2, 0.706311002518}, {.5, 0.371549279025}} {
		l := latticeOver(-.5, 1.5, 1./200)
		p := kernelMass(t, w, l, matrixOf(t, c.h*c.h, 0, c.h*c.h))
		simpson := func(i int) float64 { // of the 201 nodes of the square on one axis
			switch k := i - 100; {
			case k < 0 || k > 200:
				return 0
			case k == 0 || k == 200:
				return 1. / 600
			case k%2 == 1:
				return 4. / 600
			}
			return 2. / 600
		}
		var mean float64
		for n, v := range p.Values {
			mean += v * simpson(n%l.N[0]) * simpson(n/l.N[0])
		}
		nearly(t, "mean of p", mean, c.want, 1e-6)
		nearly(t, "mean of p, bilinear", w.MassInside(p), c.want, 1e-4)
	}
	l := latticeOver(-.513, 1.487, .04) // 2.5 steps a scale
	p := kernelMass(t, w, l, matrixOf(t, .01, 0, .01))
	phi := func(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }
	one := func(x float64) float64 { return phi((1-x)/.1) - phi(-x/.1) }
	worst := 0.0
	for j := range l.N[1] {
		for i := range l.N[0] {
			worst = max(worst, math.Abs(p.Values[j*l.N[0]+i]-one(l.Coord(0, i))*one(l.Coord(1, j))))
		}
	}
	t.Logf("2.5 steps a scale, not aligned: worst error %.2g", worst)
	if worst > 1e-3 {
		t.Errorf("worst error %g", worst)
	}
}

// METHODS.md section 6: five events on the unit square.
func TestEdgeCorrectionOfFiveEvents(t *testing.T) {
	w := areaOf(t, unitSquare)
	h := matrixOf(t, .0225, 0, .0225)
	l := latticeOver(-.75, 1.75, 1./200)
	ev := [][2]float64{{.03, .02}, {.1, .95}, {.5, .5}, {.97, .4}, {.62, .08}}
	counts := mv.NewGrid(l)
	at := func(x, y float64) int {
		return int(math.Round((y-l.Origin[1])*200))*l.N[0] + int(math.Round((x-l.Origin[0])*200))
	}
	for _, e := range ev {
		counts.Values[at(e[0], e[1])]++
	}
	density := func(c mv.Grid) mv.Grid {
		// node weights as they are: single events on nodes, so the hat is undone
		// by hand with a direct sum
		g := mv.NewGrid(l)
		for j := range l.N[1] {
			for i := range l.N[0] {
				for _, e := range ev {
					dx, dy := l.Coord(0, i)-e[0], l.Coord(1, j)-e[1]
					g.Values[j*l.N[0]+i] += c.Values[at(e[0], e[1])] / 5 * math.Exp(-(dx*dx+dy*dy)/.045) / (2 * math.Pi * .0225)
				}
			}
		}
		return g
	}
	p := kernelMass(t, w, l, h)
	f := density(counts)
	nearly(t, "uncorrected mass", w.MassInside(f), 0.6132238827, 1e-4)
	ren := mv.Grid{Lattice: l, Values: append([]float64(nil), f.Values...)}
	w.Renormalise(ren, p)
	nearly(t, "x-side mass", w.MassInside(ren), 0.83955021, 1e-4)
	w.Conserve(counts, p)
	con := density(counts)
	nearly(t, "event-side mass", w.MassInside(con), 1, 1e-4)
	for _, c := range []struct{ x, y, f, ren, con float64 }{
		{0, 0, 1.374686391, 5.498745564, 4.290738961},
		{.05, .05, 1.375615279, 3.459760229, 4.292001862},
		{.5, .5, 1.443965439, 1.446446825, 1.461933586},
		{1, .4, 1.396949056, 2.804730125, 2.415980878},
	} {
		n := at(c.x, c.y)
		nearly(t, "uncorrected", f.Values[n], c.f, 1e-8)
		nearly(t, "x-side", ren.Values[n], c.ren, 3e-6*c.ren)
		nearly(t, "event-side", con.Values[n], c.con, 3e-6*c.con)
	}
}
