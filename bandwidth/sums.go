package bandwidth

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"drumlin/mv"
)

// Sums gives the pair sums psi_k(G) = n^-2 sum_i sum_j w_i w_j D^k phi_G(X_i - X_j)
// of several even orders at one matrix; order 0 is the plain double sum. They
// are all that a quadratic criterion needs: by the heat equation the derivative
// of phi_G by G_ij is half D^(ei+ej) phi_G, so gradients are sums of two orders
// more. *mv.Spectrum and *DirectSums have it.
type Sums interface {
	Dim() int
	EffectiveN() float64
	Functionals(g mv.BandwidthMatrix, orders ...int) [][]float64
}

// SubSample is the number of events above which direct sums and likelihood
// cross-validation work on a sub-sample, drawn without replacement with a fixed
// seed (Thin). H is then chosen for the sub-sample and multiplied by
// (m/n)^(2/(d+4)), the rate at which every matrix here shrinks; a note says so.
const SubSample = 2000

// DirectSums computes pair sums from the events, n^2/2 kernels each: the oracle
// of the spectrum, and the way beyond the dimensions that a lattice reaches.
type DirectSums struct {
	sample  *mv.Sample
	workers int
}

// NewDirectSums returns the pair sums of a sample. workers 0 means one per
// processor.
func NewDirectSums(s *mv.Sample, workers int) *DirectSums { return &DirectSums{inOrder(s), workers} }

// Dim returns the number of axes.
func (s *DirectSums) Dim() int { return s.sample.Dim() }

// EffectiveN returns (sum w)^2 / sum w^2.
func (s *DirectSums) EffectiveN() float64 { return s.sample.EffectiveN() }

// Functionals implements Sums. It panics where the spectrum's would.
func (s *DirectSums) Functionals(g mv.BandwidthMatrix, orders ...int) [][]float64 {
	if slices.Equal(orders, []int{0}) || slices.Equal(orders, []int{0, 2}) {
		return s.lowOrders(g)[:len(orders)]
	}
	out := make([][]float64, len(orders))
	for i, r := range orders {
		v, err := mv.DirectFunctionals(context.Background(), s.sample, g, r, mv.EvalOptions{Workers: s.workers})
		if err != nil {
			panic("bandwidth: direct sums: " + err.Error())
		}
		out[i] = v
	}
	return out
}

// FromSample returns what selectors need of a sample: direct sums, thinned
// above SubSample events, for any dimension. For d up to 3 and many events bin
// the sample and use its spectrum.
func FromSample(s *mv.Sample, workers int) Events {
	thin := Thin(s, SubSample)
	return Events{Direct: NewDirectSums(thin, workers), Sample: thin, Covariance: s.Moments().Covariance(), WholeN: s.EffectiveN(), workers: workers}
}

// Thin returns m events of a sample, drawn without replacement with a fixed
// seed, or the sample itself when it has no more.
func Thin(s *mv.Sample, m int) *mv.Sample {
	n, d := s.Len(), s.Dim()
	if n <= m {
		return s
	}
	rng := rand.New(rand.NewPCG(uint64(n), uint64(m)))
	cols := make([][]float64, d)
	var w []float64
	for k := range cols {
		cols[k] = make([]float64, 0, m)
	}
	for i, left := 0, m; left > 0; i++ { // selection sampling, in the order of the rows
		if rng.Float64()*float64(n-i) < float64(left) {
			left--
			for k := range cols {
				cols[k] = append(cols[k], s.At(i, k))
			}
			if s.Weights() != nil {
				w = append(w, s.Weight(i))
			}
		}
	}
	out, err := mv.NewSample(cols, w)
	if err != nil {
		return s // every drawn weight was 0
	}
	return out
}

// Frame is the coordinates in which a selector works; the result is carried
// back. CommonScale and Sphered commute with rotations, Sphered with every
// linear map, Prescaled with changes of units per axis alone.
type Frame int

// Frames.
const (
	CommonScale Frame = iota // divided by sqrt(tr S / d)
	Sphered                  // multiplied by S^(-1/2), the symmetric root
	Prescaled                // each axis divided by its standard deviation
)

// String names the frame.
func (f Frame) String() string { return [...]string{"common scale", "sphered", "prescaled"}[f] }

// frame maps frame coordinates y to data x = A y: H = A H* A'.
type frame struct {
	d     int
	a     []float64
	det   float64
	s     []float64 // covariance in the frame
	round bool      // A is a multiple of the identity
	maps  map[int][][]float64
}

func newFrame(kind Frame, d int, cov []float64) (*frame, error) {
	f := &frame{d: d, a: make([]float64, d*d), s: make([]float64, d*d), det: 1, round: kind == CommonScale, maps: map[int][][]float64{}}
	switch kind {
	case CommonScale, Prescaled:
		for k := range d {
			f.a[k*d+k] = commonScale(d, cov)
			if kind == Prescaled {
				f.a[k*d+k] = math.Sqrt(cov[k*d+k])
			}
			f.det *= f.a[k*d+k]
		}
		for i := range d {
			for j := range d {
				f.s[i*d+j] = cov[i*d+j] / (f.a[i*d+i] * f.a[j*d+j])
			}
		}
	case Sphered:
		values, vectors, err := eigen(d, cov)
		if err != nil {
			return nil, err
		}
		for i := range d {
			for j := range d {
				for k := range d {
					f.a[i*d+j] += vectors[i*d+k] * math.Sqrt(values[k]) * vectors[j*d+k]
				}
			}
			f.s[i*d+i] = 1
			f.det *= math.Sqrt(values[i])
		}
	default:
		return nil, fmt.Errorf("bandwidth: frame %d is none of common scale, sphered, prescaled", kind)
	}
	return f, nil
}

// toData returns A h A'.
func (f *frame) toData(h mv.BandwidthMatrix) (mv.BandwidthMatrix, error) {
	return mv.NewBandwidthMatrix(f.d, congruent(f.d, f.a, h.Entries(), false))
}

// gradient carries a gradient by the entries of the data's H to the frame's.
func (f *frame) gradient(g []float64) []float64 { return congruent(f.d, f.a, g, true) }

// congruent returns A h A', or A' h A when transposed.
func congruent(d int, a, h []float64, transposed bool) []float64 {
	at := func(i, j int) float64 {
		if transposed {
			i, j = j, i
		}
		return a[i*d+j]
	}
	half, out := make([]float64, d*d), make([]float64, d*d)
	for i := range d {
		for j := range d {
			for k := range d {
				half[i*d+j] += at(i, k) * h[k*d+j]
			}
		}
	}
	for i := range d {
		for j := range d {
			for k := range d {
				out[i*d+j] += half[i*d+k] * at(j, k)
			}
		}
	}
	return out
}

// functionals turns functionals of order r of the data into those of the
// frame: psi*_k = |A| (A'D)^k psi.
func (f *frame) functionals(r int, psi []float64) []float64 {
	out := make([]float64, len(psi))
	if f.round {
		c := f.det * math.Pow(f.a[0], float64(r))
		for i, v := range psi {
			out[i] = c * v
		}
		return out
	}
	m := f.maps[r]
	if m == nil {
		m = f.monomials(r)
		f.maps[r] = m
	}
	for i, row := range m {
		for j, v := range psi {
			out[i] += f.det * row[j] * v
		}
	}
	return out
}

// monomials returns the coefficients of (A't)^k in the monomials t^l, for all
// multi-indices k (rows) and l (columns) of order r.
func (f *frame) monomials(r int) [][]float64 {
	d := f.d
	index, pos := mv.MultiIndices(d, r), positions(d, r)
	out := make([][]float64, len(index))
	for i, k := range index {
		poly := map[string]float64{key(make([]int, d)): 1}
		for axis, power := range k {
			for range power {
				next := make(map[string]float64, len(poly)+d)
				for l, c := range poly {
					for b := range d {
						if v := f.a[b*d+axis]; v != 0 {
							up := []byte(l)
							up[b]++
							next[string(up)] += c * v
						}
					}
				}
				poly = next
			}
		}
		out[i] = make([]float64, len(index))
		for l, c := range poly {
			out[i][pos[l]] += c
		}
	}
	return out
}
