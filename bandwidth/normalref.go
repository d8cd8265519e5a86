package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// NormalReference returns (4/((d+2)n))^(2/(d+4)) S, optimal for normal data
// and far too wide for events in several places: a reference, not a choice for
// a map. For Diagonal the off-diagonal entries of S are dropped, for Scalar its
// diagonal is averaged. Source: Wand and Jones 1995, section 4.3.
func NormalReference(e Events, shape Shape) (Choice, error) {
	if err := e.check(); err != nil {
		return Choice{}, err
	}
	d, n := e.dim(), e.wholeN()
	h, err := normalScale(e.Covariance, d, n, 4/((float64(d)+2)*n), 2/(float64(d)+4), shape)
	if err != nil {
		return Choice{}, err
	}
	return Choice{
		Method: "normal-reference", Shape: shape, Matrix: h, Status: Closed,
		Variance: gaussR(d) / (n * h.SqrtDet()),
	}, nil
}

// NormalScalePilot returns the matrix that annihilates the leading bias of the
// functional of order r for normal data, (2/((d+r)n))^(2/(d+r+2)) 2S. Source:
// Chacon and Duong 2010.
func NormalScalePilot(s []float64, d int, n float64, r int) (mv.BandwidthMatrix, error) {
	twice := make([]float64, len(s))
	for i, v := range s {
		twice[i] = 2 * v
	}
	return normalScale(twice, d, n, 2/(float64(d+r)*n), 2/float64(d+r+2), Full)
}

// HessianPilot returns the normal scale bandwidth for second derivatives,
// (4/((d+6)n))^(2/(d+8)) S: the pilot of an estimated bias. Source: Chacon,
// Duong and Wand 2011.
func HessianPilot(s []float64, d int, n float64) (mv.BandwidthMatrix, error) {
	return normalScale(s, d, n, 4/(float64(d+6)*n), 2/float64(d+8), Full)
}

func normalScale(s []float64, d int, n, base, power float64, shape Shape) (mv.BandwidthMatrix, error) {
	c := math.Pow(base, power)
	h := make([]float64, d*d)
	var mean float64
	for i := range d {
		mean += s[i*d+i] / float64(d)
	}
	for i := range d {
		for j := range d {
			switch {
			case shape == Scalar && i == j:
				h[i*d+j] = c * mean
			case shape != Full && i != j:
			default:
				h[i*d+j] = c * s[i*d+j]
			}
		}
	}
	m, err := mv.NewBandwidthMatrix(d, h)
	if err != nil {
		return m, fmt.Errorf("bandwidth: normal scale rule: %w", err)
	}
	return m, nil
}
