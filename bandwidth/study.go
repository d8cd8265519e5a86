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

// Lab is a place for a simulation study: a fixed lattice for one target and
// one n, and the target's transform on it, so that a replicate costs one
// binning, one transform and what its selectors ask.
type Lab struct {
	Target  *mv.NormalMixture
	N       int
	Optimum Choice // minimises the exact MISE
	lattice mv.Lattice
	reach   []float64
	once    sync.Once
	truth   []complex128
}

// NewLab plans the lattice: it covers every component to 4.8 standard
// deviations with at least least nodes along the longer axis and, up to most
// nodes, five steps per minor scale of the optimal matrix.
func NewLab(target *mv.NormalMixture, n, least, most int) (*Lab, error) {
	best, err := OptimalMatrix(target, float64(n), Full)
	if err != nil {
		return nil, err
	}
	d := target.Dim()
	lab := &Lab{Target: target, N: n, Optimum: best}
	lo, hi := make([]float64, d), make([]float64, d)
	var span float64
	for k := range d {
		lo[k], hi[k] = math.Inf(1), math.Inf(-1)
		for c := range target.Len() {
			_, m, s := target.Component(c)
			r := 4.8 * math.Sqrt(s.At(k, k))
			lo[k], hi[k] = min(lo[k], m[k]-r), max(hi[k], m[k]+r)
		}
		span = max(span, hi[k]-lo[k])
	}
	minor := math.Sqrt(best.Matrix.Eigenvalues()[d-1])
	step := math.Min(span/float64(least-1), math.Max(minor/5, span/float64(most-1)))
	steps, counts := make([]float64, d), make([]int, d)
	for k := range d {
		steps[k], counts[k] = step, int((hi[k]-lo[k])/step)+2
	}
	if lab.lattice, err = mv.NewLattice(lo, steps, counts); err != nil {
		return nil, err
	}
	widest, err := NormalScalePilot(target.Covariance(), d, float64(n), WidestOrder)
	if err != nil {
		return nil, err
	}
	for k := range d {
		// The lattice itself reaches past the events by a good deal.
		free := (hi[k] - lo[k]) - 8*math.Sqrt(target.Covariance()[k*d+k])
		lab.reach = append(lab.reach, max(0.05*(hi[k]-lo[k]), 7*math.Sqrt(widest.At(k, k))-max(0, free)))
	}
	return lab, nil
}

// Draw makes replicate r: events of the target, binned and transformed. The
// same seed and r give the same events.
func (l *Lab) Draw(seed uint64, r int) (Events, error) {
	rng := rand.New(rand.NewPCG(seed, uint64(r)))
	for range 50 {
		s, err := l.Target.Sample(rng, l.N)
		if err != nil {
			return Events{}, err
		}
		g, err := mv.Bin(s, l.lattice)
		if err != nil {
			continue // an event beyond 4.8 standard deviations: draw again
		}
		sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: l.reach, Workers: 1})
		if err != nil {
			return Events{}, err
		}
		l.once.Do(func() { l.truth = sp.Characteristic(l.Target) })
		return Events{Spectrum: sp, Sample: s, Counts: g, Covariance: s.Moments().Covariance()}, nil
	}
	return Events{}, fmt.Errorf("bandwidth: study: fifty samples left the lattice")
}

// ISE returns the integrated squared error of a replicate at h, on the lattice.
func (l *Lab) ISE(e Events, h mv.BandwidthMatrix) float64 {
	return e.Spectrum.SquaredError(h, l.truth)
}

// StepsPerScale returns how many lattice steps the minor scale of the optimal
// matrix spans.
func (l *Lab) StepsPerScale() float64 {
	v := l.Optimum.Matrix.Eigenvalues()
	return math.Sqrt(v[len(v)-1]) / slices.Max(l.lattice.Step)
}

// Entrant is a selector in a study.
type Entrant struct {
	Name   string
	Method string // of Select
	Options
	// Every is 1, or k to enter only every k-th replicate (for slow selectors).
	Every int
}

// Entrants returns the selectors of the study, the default first.
func Entrants() []Entrant {
	return []Entrant{
		{"auto", "auto", Options{}, 1},
		{"plug-in", "plug-in", Options{}, 1},
		{"plug-in 2 stages", "plug-in", Options{Stages: 2}, 1},
		{"plug-in 5 stages", "plug-in", Options{Stages: 5}, 1},
		{"plug-in scalar pilots", "plug-in", Options{ScalarPilots: true}, 1},
		{"plug-in diagonal", "plug-in", Options{Shape: Diagonal}, 1},
		{"scv", "scv", Options{}, 1},
		{"lscv", "lscv", Options{}, 1},
		{"lscv diagonal", "lscv", Options{Shape: Diagonal}, 1},
		{"bcv", "bcv", Options{}, 4},
		{"likelihood-cv", "likelihood-cv", Options{}, 20},
		{"normal-reference", "normal-reference", Options{}, 1},
	}
}

// Score is what a selector did on a target.
type Score struct {
	Entrant    Entrant
	Ratios     []float64 // ISE over the exact minimal MISE, by replicate
	Failed     int       // replicates without a matrix
	Mean, SE   float64   // standard error of the mean
	Median     float64
	Worst      float64
	Replicates int
}

// Run draws the replicates and runs the entrants on each, workers replicates at
// a time, each on one goroutine; the result does not depend on that number.
func (l *Lab) Run(ctx context.Context, seed uint64, replicates int, entrants []Entrant, workers int) ([]Score, error) {
	ratio := make([][]float64, replicates)
	fails := make([]error, replicates)
	next := make(chan int)
	var wg sync.WaitGroup
	for range max(1, workers) {
		wg.Go(func() {
			for r := range next {
				if ctx.Err() == nil {
					ratio[r], fails[r] = l.replicate(seed, r, entrants)
				}
			}
		})
	}
	for r := range replicates {
		next <- r
	}
	close(next)
	wg.Wait()
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	out := make([]Score, len(entrants))
	for i, en := range entrants {
		s := Score{Entrant: en}
		for r := range replicates {
			if fails[r] != nil {
				return nil, fails[r]
			}
			switch v := ratio[r][i]; {
			case math.IsNaN(v): // not entered
			case v < 0:
				s.Failed++
			default:
				s.Ratios = append(s.Ratios, v)
			}
		}
		s.summarise()
		out[i] = s
	}
	return out, nil
}

// replicate returns a ratio per entrant, NaN where it is not entered, -1 where
// it found no matrix.
func (l *Lab) replicate(seed uint64, r int, entrants []Entrant) ([]float64, error) {
	e, err := l.Draw(seed, r)
	if err != nil {
		return nil, err
	}
	out := make([]float64, len(entrants))
	for i, en := range entrants {
		if en.Every > 1 && r%en.Every != 0 {
			out[i] = math.NaN()
			continue
		}
		c, err := Select(e, en.Method, en.Options)
		if err != nil {
			out[i] = -1
			continue
		}
		out[i] = l.ISE(e, c.Matrix) / l.Optimum.Criterion
	}
	return out, nil
}

func (s *Score) summarise() {
	n := len(s.Ratios)
	s.Replicates = n
	if n == 0 {
		return
	}
	var square float64
	for _, v := range s.Ratios {
		s.Mean += v / float64(n)
	}
	for _, v := range s.Ratios {
		square += (v - s.Mean) * (v - s.Mean)
	}
	if n > 1 {
		s.SE = math.Sqrt(square / float64(n-1) / float64(n))
	}
	v := slices.Sorted(slices.Values(s.Ratios))
	s.Worst = v[n-1]
	s.Median = v[n/2]
	if n%2 == 0 {
		s.Median = (v[n/2-1] + v[n/2]) / 2
	}
}
