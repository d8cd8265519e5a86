package mv

import (
	"fmt"
	"math"

	"drumlin/mv/internal/fft"
)

// Density returns the Gaussian kernel density estimate with bandwidth matrix h
// at the lattice's nodes. It integrates to 1; unit: data units to the power -d.
func (s *Spectrum) Density(h BandwidthMatrix) Grid {
	return s.surface(h, nil, 1)
}

// Derivative returns the partial derivative of the density estimate with
// exponents k per axis.
func (s *Spectrum) Derivative(h BandwidthMatrix, k []int) Grid {
	if len(k) != s.Dim() {
		panic(fmt.Sprintf("mv: derivative: %d exponents for dimension %d", len(k), s.Dim()))
	}
	order := 0
	for _, e := range k {
		order += e
	}
	phase := [4]complex128{1, complex(0, 1), -1, complex(0, -1)}[order%4] // i^order
	return s.surface(h, func(axis0 []float64, rest []float64, row []float64) {
		c := 1.0
		for j, t := range rest {
			for range k[j+1] {
				c *= t
			}
		}
		for i, t := range axis0 {
			v := c
			for range k[0] {
				v *= t
			}
			row[i] *= v
		}
	}, phase)
}

// SmoothingBias returns the leading term of the estimate's bias with bandwidth
// matrix h, tr(h Hess f)/2, its Hessian estimated with pilot g. Source: Wand
// and Jones 1995, section 4.3.
func (s *Spectrum) SmoothingBias(h, g BandwidthMatrix) Grid {
	m := h.Entries()
	d := s.Dim()
	return s.surface(g, func(axis0 []float64, rest []float64, row []float64) {
		var b, c float64
		for i, ti := range rest {
			b += m[i+1] * ti
			for j, tj := range rest {
				c += m[(i+1)*d+j+1] * ti * tj
			}
		}
		for i, t := range axis0 {
			row[i] *= -0.5 * ((m[0]*t+2*b)*t + c)
		}
	}, 1)
}

// surface returns the inverse transform of phi(t) exp(-t'At/2) times phase and
// a real factor that shape multiplies into a line of values (axis-0
// frequencies, frequencies of the other axes, values).
func (s *Spectrum) surface(a BandwidthMatrix, shape func(axis0, rest, row []float64), phase complex128) Grid {
	if a.Dim() != s.Dim() {
		panic(fmt.Sprintf("mv: surface: matrix of dimension %d for a spectrum of dimension %d", a.Dim(), s.Dim()))
	}
	m := a.Entries()
	width := s.half.Width()
	work := fft.Half{Keep: s.pad, Data: make([]complex128, len(s.half.Data))}
	norm := 1.0
	for k := range s.pad {
		norm /= float64(s.pad[k]) * s.lat.Step[k]
	}
	s.eachRow(func(row int, restBins []int) {
		qa, qb, qc := s.line(m, restBins)
		from, to := live(qa, qb, qc, s.freq[0], width)
		if from >= to {
			return
		}
		rest := make([]float64, len(restBins))
		for k, bin := range restBins {
			rest[k] = s.freq[k+1][bin]
			if phase == complex(0, 1) || phase == complex(0, -1) {
				if 2*bin == s.pad[k+1] {
					return // an odd derivative has no border frequency
				}
			}
		}
		factor := make([]float64, to-from)
		t0 := s.freq[0][from:to]
		for i, t := range t0 {
			factor[i] = norm * math.Exp(-0.5*((qa*t+2*qb)*t+qc))
		}
		if shape != nil {
			shape(t0, rest, factor)
		}
		out := work.Data[row*width+from : row*width+to]
		for i, v := range s.half.Data[row*width+from : row*width+to] {
			out[i] = v * complex(factor[i], 0) * phase
		}
	})
	return Grid{Lattice: s.lat, Values: fft.Inverse(work, s.lat.N, s.workers)}
}
