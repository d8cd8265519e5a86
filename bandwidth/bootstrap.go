package bandwidth

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"

	"drumlin/mv"
)

// BootstrapOptions steer Bootstrap.
type BootstrapOptions struct {
	Method     string // of Select; likelihood-cv is not possible, the others are
	Options    Options
	Replicates int // at least 1
	Seed       uint64
	Workers    int // replicates at one time; default 1. Results do not depend on it.
}

// Stability holds the matrices that a selector chooses from new events drawn
// from the estimate itself.
type Stability struct {
	Choice   Choice             // from the events
	Pilot    mv.BandwidthMatrix // G of the density drawn from
	Matrices []mv.BandwidthMatrix
	Failed   int // replicates in which the selector found no minimum
}

// Bootstrap draws n events from the density estimate with pilot G, n the
// effective size rounded, by a multinomial over the lattice's nodes, and
// chooses a matrix from each draw. G is the matrix that the selector itself
// chose, so the spread is that of events as smooth as the map shows them: a
// lower bound on what new data would do where the map smooths much away.
//
// Sources: smoothed bootstrap, Taylor 1989; Hall, Marron and Park 1992.
func Bootstrap(ctx context.Context, e Events, opt BootstrapOptions) (*Stability, error) {
	if e.Spectrum == nil {
		return nil, fmt.Errorf("bandwidth: bootstrap needs a spectrum, whose nodes it draws from: %w", mv.ErrShape)
	}
	if opt.Method == "likelihood-cv" {
		return nil, fmt.Errorf("bandwidth: bootstrap of likelihood-cv is not possible, draws have no positions beyond nodes: %w", mv.ErrShape)
	}
	c, err := Select(e, opt.Method, opt.Options)
	if err != nil {
		return nil, err
	}
	out := &Stability{Choice: c, Pilot: c.Matrix}
	density := e.Spectrum.Density(out.Pilot)
	sums := make([]float64, len(density.Values)+1)
	for i, v := range density.Values {
		sums[i+1] = sums[i] + math.Max(0, v)
	}
	n := int(math.Round(e.n()))
	reach := make([]float64, e.dim())
	lat := e.Spectrum.Lattice()
	for k, free := range e.Spectrum.Free() {
		// The draws may fill the lattice; the frequencies beyond are the same.
		reach[k] = max(0, free-0.5*lat.Step[k]*float64(lat.N[k]))
	}
	found := make([]mv.BandwidthMatrix, opt.Replicates)
	next := make(chan int)
	var wg sync.WaitGroup
	for range max(1, opt.Workers) {
		wg.Go(func() {
			for r := range next {
				if ctx.Err() != nil {
					continue
				}
				rng := rand.New(rand.NewPCG(opt.Seed, uint64(r)))
				g := multinomial(rng, density.Lattice, sums, n)
				_, cov, err := g.Moments(float64(n))
				if err != nil {
					continue
				}
				sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: reach, Workers: 1})
				if err != nil {
					continue
				}
				if c, err := Select(Events{Spectrum: sp, Covariance: cov, Counts: g}, opt.Method, opt.Options); err == nil {
					found[r] = c.Matrix
				}
			}
		})
	}
	for r := range opt.Replicates {
		next <- r
	}
	close(next)
	wg.Wait()
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	for _, h := range found {
		if h.Dim() == 0 {
			out.Failed++
			continue
		}
		out.Matrices = append(out.Matrices, h)
	}
	if len(out.Matrices) == 0 {
		return nil, fmt.Errorf("bandwidth: bootstrap: no replicate has a minimum: %w", ErrNoMinimum)
	}
	return out, nil
}

// multinomial draws n events over nodes with the given cumulative weights, each
// moved evenly within its cell and binned linearly, as real events are.
func multinomial(rng *rand.Rand, l mv.Lattice, sums []float64, n int) mv.Grid {
	g := mv.NewGrid(l)
	d := l.Dim()
	total := sums[len(sums)-1]
	base, frac := make([]int, d), make([]float64, d)
	for range n {
		u := rng.Float64() * total
		at, _ := slices.BinarySearch(sums, u)
		at = min(max(0, at-1), len(sums)-2)
		for k, rest := 0, at; k < d; k++ {
			v := float64(rest%l.N[k]) + rng.Float64() - 0.5
			v = math.Min(math.Max(v, 0), float64(l.N[k]-1)-1e-9)
			base[k] = int(v)
			frac[k] = v - float64(base[k])
			rest /= l.N[k]
		}
		for corner := range 1 << d {
			node, stride, w := 0, 1, 1.0
			for k := range d {
				bit := corner >> k & 1
				node += (base[k] + bit) * stride
				stride *= l.N[k]
				if bit == 1 {
					w *= frac[k]
				} else {
					w *= 1 - frac[k]
				}
			}
			if w > 0 {
				g.Values[node] += w
			}
		}
	}
	return g
}

// Intervals are quantiles, 5, 50 and 95 per cent, of the ellipse.
type Intervals struct {
	Major, Minor [3]float64 // scales, data units
	// Bearing is that of the major axis in degrees, each replicate's taken
	// within 90 degrees of the choice's, so that it may pass 0 or 180.
	Bearing [3]float64
}

// Intervals returns the quantiles. It panics unless d is 2.
func (s *Stability) Intervals() Intervals {
	centre := s.Choice.Matrix.Ellipse().Bearing
	var major, minor, bearing []float64
	for _, h := range s.Matrices {
		e := h.Ellipse()
		major, minor = append(major, e.Major), append(minor, e.Minor)
		bearing = append(bearing, centre+math.Remainder(e.Bearing-centre, 180))
	}
	at := func(v []float64) (q [3]float64) {
		slices.Sort(v)
		for i, p := range []float64{0.05, 0.5, 0.95} {
			x := p * float64(len(v)-1)
			k := min(int(x), max(0, len(v)-2))
			q[i] = v[k]
			if len(v) > 1 {
				q[i] += (x - float64(k)) * (v[k+1] - v[k])
			}
		}
		return q
	}
	return Intervals{at(major), at(minor), at(bearing)}
}
