package mv

import (
	"fmt"
	"math"

	"drumlin/mv/internal/fft"
)

// SpectrumOptions settle how a spectrum is computed.
type SpectrumOptions struct {
	// Reach is the length that must be free of wrap-around beyond the counts on
	// each axis, data units: 7*sqrt(S_kk) for the largest matrix S that a sum
	// will use. Default: a tenth of the extent.
	Reach []float64
	// Coarsen keeps only the frequencies of a lattice whose step is 2^Coarsen
	// times that of the counts: surfaces then come out on that lattice, while
	// the error of binning is that of the finer one. Default 0.
	Coarsen int
	// EffectiveN is (sum w)^2 / sum w^2; default the sum of the counts.
	EffectiveN float64
	Workers    int // goroutines; default 1
}

// Spectrum is the empirical characteristic function of binned events,
//
//	phi(t) = sum_i w_i exp(-i t'(X_i - origin)) / sum_i w_i,
//
// on the frequencies t of a padded lattice, freed of linear binning's known
// transform (sinc squared per axis). With a Gaussian kernel every surface is an
// inverse transform of phi(t) exp(-t'Ht/2) and every quadratic criterion a
// weighted sum of |phi(t)|^2, for any full bandwidth matrix H, so no selector
// needs the events again.
//
// Binning leaves an error from frequencies beyond the lattice's; against direct
// sums it is about 1e-3 of the density's maximum at 4 steps per minor scale of
// H and 1e-4 at 10, and falls with n (the tests hold figures).
//
// Immutable and safe to share. Memory: 24 bytes per frequency kept, half of
// the padded nodes.
type Spectrum struct {
	lat     Lattice // of the surfaces
	pad     []int   // padded nodes per axis of that lattice
	half    fft.Half
	power   []float64   // |phi|^2, each pair of conjugates once with weight 2
	freq    [][]float64 // angular frequency of each kept bin, per axis
	total   float64     // sum of weights
	n       float64     // effective n
	extent  []float64   // length that the events occupy on each axis
	workers int
}

// NewSpectrum transforms node weights. Errors: ErrDegenerate when the weights
// add to nothing, ErrTooLarge above 2^28 padded nodes.
func NewSpectrum(counts Grid, opt SpectrumOptions) (*Spectrum, error) {
	d := counts.Dim()
	s := &Spectrum{workers: max(1, opt.Workers), n: opt.EffectiveN}
	for _, v := range counts.Values {
		s.total += v
	}
	if !(s.total > 0) {
		return nil, fmt.Errorf("mv: spectrum: node weights add to %g: %w", s.total, ErrDegenerate)
	}
	if s.n == 0 {
		s.n = s.total
	}
	ratio := 1 << opt.Coarsen
	s.lat = Lattice{Origin: append([]float64(nil), counts.Origin...), Step: make([]float64, d), N: make([]int, d)}
	padFine := make([]int, d)
	s.pad = make([]int, d)
	nodes := 1
	for k := range d {
		s.lat.Step[k] = counts.Step[k] * float64(ratio)
		s.lat.N[k] = (counts.N[k]-1)/ratio + 1
		reach := 0.1 * counts.Step[k] * float64(counts.N[k])
		if opt.Reach != nil {
			reach = opt.Reach[k]
		}
		s.pad[k] = fft.GoodSize(int(math.Ceil((counts.Step[k]*float64(counts.N[k])+reach)/s.lat.Step[k])) + 1)
		padFine[k] = s.pad[k] * ratio
		nodes *= padFine[k]
		if nodes > 1<<28 {
			return nil, fmt.Errorf("mv: spectrum: %v padded nodes and more, 2^28 at most: %w", padFine[:k+1], ErrTooLarge)
		}
	}
	s.extent = occupiedExtent(counts)
	s.half = fft.Forward(counts.Values, counts.N, padFine, s.pad, s.workers)
	s.freq = make([][]float64, d)
	hat := make([][]float64, d) // 1/sinc^2 of half the phase step
	for k := range d {
		m := s.pad[k]
		if k == 0 {
			m = s.half.Width()
		}
		s.freq[k], hat[k] = make([]float64, m), make([]float64, m)
		for i := range m {
			f := 2 * math.Pi * float64(fft.Frequency(i, s.pad[k])) / (float64(s.pad[k]) * s.lat.Step[k])
			s.freq[k][i] = f
			hat[k][i] = 1
			if a := f * counts.Step[k] / 2; a != 0 {
				sinc := math.Sin(a) / a
				hat[k][i] = 1 / (sinc * sinc)
			}
		}
	}
	s.power = make([]float64, len(s.half.Data))
	width := s.half.Width()
	s.eachRow(func(row int, rest []int) {
		c := 1 / s.total
		for k, i := range rest {
			c *= hat[k+1][i]
			if ratio > 1 && 2*i == s.pad[k+1] {
				c = 0 // the border frequency stands for two that the finer lattice tells apart
			}
		}
		for i := range width {
			at := row*width + i
			f := c * hat[0][i]
			pairs := 2.0
			if i == 0 || 2*i == s.pad[0] {
				pairs = 1
				if i > 0 && ratio > 1 {
					f = 0
				}
			}
			v := s.half.Data[at] * complex(f, 0)
			s.half.Data[at] = v
			s.power[at] = pairs * (real(v)*real(v) + imag(v)*imag(v))
		}
	})
	return s, nil
}

// eachRow calls f for every line of frequencies along axis 0, with the bin
// indices of the other axes.
func (s *Spectrum) eachRow(f func(row int, rest []int)) {
	fft.Parallel(s.half.Rows(), s.workers, func() []int { return make([]int, len(s.pad)-1) }, func(row int, rest []int) {
		r := row
		for k := range rest {
			rest[k] = r % s.pad[k+1]
			r /= s.pad[k+1]
		}
		f(row, rest)
	})
}

// Dim returns the number of axes.
func (s *Spectrum) Dim() int { return s.lat.Dim() }

// Lattice returns the lattice of the surfaces.
func (s *Spectrum) Lattice() Lattice { return s.lat }

// EffectiveN returns (sum w)^2 / sum w^2.
func (s *Spectrum) EffectiveN() float64 { return s.n }

// Free returns the length per axis between the events and their next periodic
// copies: seven scales of a matrix must fit into it for its sums to be free of
// wrap-around.
func (s *Spectrum) Free() []float64 {
	free := make([]float64, s.Dim())
	for k := range free {
		free[k] = s.lat.Step[k]*float64(s.pad[k]) - s.extent[k]
	}
	return free
}

// occupiedExtent returns the distance between the outermost nodes that carry
// something, per axis.
func occupiedExtent(g Grid) []float64 {
	d := g.Dim()
	lo, hi, at := make([]int, d), make([]int, d), make([]int, d)
	copy(lo, g.N)
	for _, w := range g.Values {
		if w != 0 {
			for k, i := range at {
				lo[k], hi[k] = min(lo[k], i), max(hi[k], i)
			}
		}
		for k := range at {
			if at[k]++; at[k] < g.N[k] {
				break
			}
			at[k] = 0
		}
	}
	out := make([]float64, d)
	for k := range out {
		out[k] = g.Step[k] * float64(max(0, hi[k]-lo[k]))
	}
	return out
}

// dead is the exponent below which a Gaussian factor counts as zero: e^-37 is
// 1e-16 of the largest.
const dead = 37

// live returns the bins of axis 0 at which t'At/2 < dead, for the line with
// the given other frequencies: t'At = a*t0^2 + 2*b*t0 + c there.
func live(a, b, c float64, freq []float64, bins int) (from, to int) {
	disc := b*b - a*(c-2*dead)
	if disc <= 0 {
		return 0, 0
	}
	root := math.Sqrt(disc)
	step := freq[min(1, bins-1)]
	if step == 0 {
		return 0, bins
	}
	lo, hi := (-b-root)/(a*step), (-b+root)/(a*step)
	return int(math.Ceil(max(0, lo))), max(0, min(bins, int(math.Floor(min(hi, float64(bins))))+1))
}

// line gives a, b and c of live for matrix entries m (row-major) and the other
// frequencies.
func (s *Spectrum) line(m []float64, rest []int) (a, b, c float64) {
	d := s.Dim()
	a = m[0]
	for i, bi := range rest {
		ti := s.freq[i+1][bi]
		b += m[i+1] * ti
		for j, bj := range rest {
			c += m[(i+1)*d+j+1] * ti * s.freq[j+1][bj]
		}
	}
	return a, b, c
}
