package mv

import (
	"fmt"
	"math"
)

// Characteristic returns the characteristic function of a normal mixture at
// the spectrum's frequencies, in the order in which SquaredError takes it:
//
//	sum_k w_k exp(-i t'(m_k - origin) - t'S_k t/2).
func (s *Spectrum) Characteristic(m *NormalMixture) []complex128 {
	d := s.Dim()
	if m.Dim() != d {
		panic(fmt.Sprintf("mv: characteristic: mixture of dimension %d for a spectrum of dimension %d", m.Dim(), d))
	}
	width := s.half.Width()
	out := make([]complex128, len(s.half.Data))
	s.eachRow(func(row int, rest []int) {
		t := make([]float64, d)
		for k, bin := range rest {
			t[k+1] = s.freq[k+1][bin]
		}
		for i := range width {
			t[0] = s.freq[0][i]
			var sum complex128
			for c, w := range m.w {
				q := 0.5 * m.cov[c].Quad(t)
				if q >= dead {
					continue
				}
				var phase float64
				for k, v := range t {
					phase += v * (m.mean[c][k] - s.lat.Origin[k])
				}
				sin, cos := math.Sincos(phase)
				e := w * math.Exp(-q)
				sum += complex(e*cos, -e*sin)
			}
			out[row*width+i] = sum
		}
	})
	return out
}

// SquaredError returns the integrated squared error of the density estimate
// with bandwidth matrix h against the density whose characteristic function is
// given (Characteristic): by Parseval's identity the sum of the squared
// differences at the nodes of the padded lattice. Cost: a pass over the
// frequencies, no transform.
func (s *Spectrum) SquaredError(h BandwidthMatrix, target []complex128) float64 {
	if h.Dim() != s.Dim() || len(target) != len(s.half.Data) {
		panic(fmt.Sprintf("mv: squared error: matrix of dimension %d and %d frequencies for a spectrum of %d in dimension %d", h.Dim(), len(target), len(s.half.Data), s.Dim()))
	}
	m := h.Entries()
	width := s.half.Width()
	part := make([]float64, s.half.Rows())
	s.eachRow(func(row int, rest []int) {
		a, b, c := s.line(m, rest)
		from, to := live(a, b, c, s.freq[0], width)
		for i := range width {
			at := row*width + i
			diff := -target[at]
			if from <= i && i < to {
				t := s.freq[0][i]
				diff += s.half.Data[at] * complex(math.Exp(-0.5*((a*t+2*b)*t+c)), 0)
			}
			v := real(diff)*real(diff) + imag(diff)*imag(diff)
			if i > 0 && 2*i != s.pad[0] {
				v *= 2 // the conjugate
			}
			part[row] += v
		}
	})
	var sum float64
	for _, v := range part {
		sum += v
	}
	for k := range s.pad {
		sum /= float64(s.pad[k]) * s.lat.Step[k]
	}
	return sum
}
