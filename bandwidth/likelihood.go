package bandwidth

import (
	"errors"
	"fmt"
	"math"

	"drumlin/mv"
)

// likelihoodEvents is the number of events above which likelihood
// cross-validation works on a sub-sample (Thin).
const likelihoodEvents = 600

// LikelihoodCV returns the likelihood cross-validation criterion, to be
// minimised,
//
//	-sum_i v_i ln f_-i(X_i),   f_-i(x) = sum_{j/=i} w_j K_H(x - X_j) / sum_{j/=i} w_j,
//
// v the weights divided by their sum, in log-sum-exp, so that it stays finite
// for every H. It is no quadratic criterion: the sums are direct, n^2 kernels
// each time. Weights above 0 only. Source: Habbema, Hermans and van den Broek
// 1974; Duin 1976.
func LikelihoodCV(s *mv.Sample) (Criterion, error) {
	if s == nil || s.Len() < 2 {
		return nil, fmt.Errorf("bandwidth: likelihood cross-validation needs at least two events: %w", mv.ErrDegenerate)
	}
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		v, g, _ := likelihood(s, h)
		return v, g
	}, nil
}

// likelihood returns the criterion, its gradient and the logarithm of every
// leave-one-out density.
func likelihood(s *mv.Sample, h mv.BandwidthMatrix) (value float64, grad, logs []float64) {
	d, n := s.Dim(), s.Len()
	z := whiten(s, h)
	logs = make([]float64, n)
	logNorm := -0.5 * (float64(d)*math.Log(2*math.Pi) + h.LogDet())
	dist, near := make([]float64, n), 0.0
	outer := make([]float64, d*d) // sum of z z' weighted, in whitened coordinates
	row := make([]float64, d*d)
	for i := range n {
		near = math.Inf(1)
		zi := z[i*d : (i+1)*d]
		for j := range n {
			var q float64
			for k, v := range z[j*d : (j+1)*d] {
				v -= zi[k]
				q += v * v
			}
			dist[j] = q
			if j != i {
				near = min(near, q)
			}
		}
		var total float64
		clear(row)
		for j := range n {
			q := dist[j] - near
			if j == i || q > 80 {
				continue
			}
			p := s.Weight(j) * math.Exp(-0.5*q)
			total += p
			zj := z[j*d : (j+1)*d]
			for a := range d {
				u := p * (zj[a] - zi[a])
				for b := range a + 1 {
					row[a*d+b] += u * (zj[b] - zi[b])
				}
			}
		}
		v := s.Weight(i) / s.SumWeights()
		logs[i] = logNorm + math.Log(total) - 0.5*near - math.Log(s.SumWeights()-s.Weight(i))
		value -= v * logs[i]
		for ab, r := range row {
			outer[ab] += v * r / total
		}
	}
	// d ln K_H(x)/dH = 1/2 (P x x' P - P), P = H^-1; P x = L^-T z.
	mid := make([]float64, d*d)
	for a := range d {
		for b := range a + 1 {
			mid[a*d+b], mid[b*d+a] = outer[a*d+b], outer[a*d+b]
		}
		mid[a*d+a]--
	}
	grad = congruent(d, invLower(h), mid, true)
	return value, scaleAll(grad, -0.5), logs
}

// whiten returns the rows of L^-1 x, H = L L'.
func whiten(s *mv.Sample, h mv.BandwidthMatrix) []float64 {
	d, n := s.Dim(), s.Len()
	inv := invLower(h)
	z := make([]float64, n*d)
	for i := range n {
		for a := range d {
			for b := range a + 1 {
				z[i*d+a] += inv[a*d+b] * (s.At(i, b) - s.At(0, b))
			}
		}
	}
	return z
}

// invLower returns L^-1, row-major.
func invLower(h mv.BandwidthMatrix) []float64 {
	d := h.Dim()
	inv := make([]float64, d*d)
	for c := range d {
		for i := c; i < d; i++ {
			v := 0.0
			if i == c {
				v = 1
			}
			for k := c; k < i; k++ {
				v -= h.LowerAt(i, k) * inv[k*d+c]
			}
			inv[i*d+c] = v / h.LowerAt(i, i)
		}
	}
	return inv
}

// LikelihoodCrossValidation minimises LikelihoodCV over the events of e.Sample,
// thinned above 600. One isolated event widens H at will, since its own
// density counts as a logarithm; such events are named in a note: those whose
// leave-one-out density lies below that of a single neighbour three scales
// away. Errors: mv.ErrDegenerate without a sample; ErrNoMinimum where so many
// events are repeated that H shrinks without end.
func LikelihoodCrossValidation(e Events, opt Options) (Choice, error) {
	if err := errors.Join(e.check(), opt.check()); err != nil {
		return Choice{}, err
	}
	if e.Sample == nil {
		return Choice{}, fmt.Errorf("bandwidth: likelihood-cv needs events, not their sums alone: %w", mv.ErrDegenerate)
	}
	s := Thin(e.Sample, likelihoodEvents)
	crit, err := LikelihoodCV(s)
	if err != nil {
		return Choice{}, err
	}
	in := e // sums of all events give the start, the criterion the end
	in.WholeN = 0
	c, err := searchAround(in, in, opt, "likelihood-cv", crit)
	if err != nil {
		return c, err
	}
	if c.Status == Border {
		return c, fmt.Errorf("bandwidth: likelihood-cv: the likelihood grows up to the least scale searched, as it does where most events are repeated: %w", ErrNoMinimum)
	}
	_, _, logs := likelihood(s, c.Matrix)
	lone := math.Log(kernelAtZero(c.Matrix)/float64(s.Len()-1)) - 4.5
	for i, l := range logs {
		if l < lone {
			c.Isolated = append(c.Isolated, s.Row(nil, i))
		}
	}
	if n := len(c.Isolated); n > 0 {
		c.Notes = append(c.Notes, fmt.Sprintf("%d events stand alone and widen this matrix", n))
	}
	in.WholeN = max(e.WholeN, e.n())
	if m := s.EffectiveN(); in.WholeN > 1.0001*m {
		k := math.Pow(m/in.WholeN, 2/(float64(s.Dim())+4))
		c.Matrix = multiple(c.Matrix, k)
		c.Notes = append(c.Notes, fmt.Sprintf("chosen on a sub-sample of %.0f of %.0f events and multiplied by %.4g", m, in.WholeN, k))
	}
	return c, nil
}
