package spatial_test

import (
	"math/rand/v2"
	"slices"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// study is an analysis with the events it came from.
type study struct {
	spatial.Analysis
	events []spatial.XY
}

// newStudy draws n events of a mixture and bins them linearly. unit is metres
// per unit of the mixture.
func newStudy(m mixture, nodes, n int, unit float64, r *rand.Rand) study {
	g := m.grid(-7, 7, nodes, unit)
	s := study{Analysis: spatial.Analysis{Density: g, RegionRule: "events", KernelAtZero: slices.Max(g.Values) / 4}}
	var heights []float64
	for len(s.events) < n {
		x, y := m.draw(r)
		u, v := (x*unit-g.Origin[0])/g.Step[0], (y*unit-g.Origin[1])/g.Step[1]
		i, j := int(u), int(v)
		if u < 0 || v < 0 || i >= nodes-1 || j >= nodes-1 {
			continue
		}
		s.events = append(s.events, spatial.XY{X: x * unit, Y: y * unit})
		heights = append(heights, m.at(x, y)/unit/unit)
	}
	s.Counts = s.binned(1)
	s.Events, s.Total = float64(n), float64(n)
	slices.Sort(heights)
	for _, p := range []float64{.5, .75, .95} {
		s.Regions = append(s.Regions, spatial.Threshold{Content: p, Density: heights[int(float64(n)*(1-p))]})
	}
	top := slices.Max(g.Values)
	for k := range 8 {
		s.BandLevels = append(s.BandLevels, top*(float64(k)+.3)/8.5)
	}
	for _, q := range spatial.FindMaxima(g, top/1000) {
		s.Peaks = append(s.Peaks, spatial.Summit{At: spatial.XY{X: q.X, Y: q.Y}, Density: q.Value, StandardError: q.Value / 10, SmoothingBias: -q.Value / 20})
	}
	return s
}

// binned bins the events linearly on the lattice made r times finer.
func (s study) binned(r int) mv.Grid {
	l := s.Density.Lattice
	nx, ny := (l.N[0]-1)*r+1, (l.N[1]-1)*r+1
	g := mv.NewGrid(mv.Lattice{Origin: l.Origin, Step: []float64{l.Step[0] / float64(r), l.Step[1] / float64(r)}, N: []int{nx, ny}})
	for _, e := range s.events {
		u, v := (e.X-g.Origin[0])/g.Step[0], (e.Y-g.Origin[1])/g.Step[1]
		i, j := int(u), int(v)
		u, v = u-float64(i), v-float64(j)
		c := g.Values[j*nx+i:]
		c[0] += (1 - u) * (1 - v)
		c[1] += u * (1 - v)
		c[nx] += (1 - u) * v
		c[nx+1] += u * v
	}
	return g
}

// inside counts the events in a shape.
func (s study) inside(mp spatial.MultiPolygon) (n float64) {
	for _, p := range mp {
		lo, hi := p[0][0], p[0][0]
		for _, v := range p[0] {
			lo.X, lo.Y, hi.X, hi.Y = min(lo.X, v.X), min(lo.Y, v.Y), max(hi.X, v.X), max(hi.Y, v.Y)
		}
		for _, e := range s.events {
			if e.X >= lo.X && e.X <= hi.X && e.Y >= lo.Y && e.Y <= hi.Y && p.Contains(e) {
				n++
			}
		}
	}
	return n
}

// checkParts fails if a part or a hole holds fewer than least events.
func (s study) checkParts(t *testing.T, what string, mp spatial.MultiPolygon, least float64) {
	t.Helper()
	for _, p := range mp {
		if n := s.inside(spatial.MultiPolygon{p}); n < least {
			t.Fatalf("%s: a part with %g events", what, n)
		}
		for _, h := range p[1:] {
			if n := s.inside(spatial.MultiPolygon{{h}}); n < least {
				t.Fatalf("%s: a hole with %g events", what, n)
			}
		}
	}
}
