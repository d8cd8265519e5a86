package mvtest

import "drumlin/mv"

var p12 = [3][]float64{
	{0.2, 0.9, 1.1, -0.3, 0.5, 1.8, 2.2, -1.0, 0.0, 1.4, 2.9, -0.6},
	{0.1, 0.4, 1.3, 0.6, -0.7, 1.1, 2.4, -0.5, 0.0, 0.2, 1.7, 1.2},
	{0.3, -0.2, 0.8, 0.1, -0.9, 1.2, 0.7, -1.1, 0.0, 0.4, 1.5, -0.3},
}

// P12 returns the first d of the three columns of the twelve-event data set on
// which the worked values were computed.
func P12(d int) *mv.Sample { return must(mv.NewSample(p12[:d], nil)) }

// P12H returns the bandwidth matrix of the worked values in dimension 1 to 3.
func P12H(d int) mv.BandwidthMatrix {
	switch d {
	case 1:
		return Matrix(1, 0.25)
	case 2:
		return Matrix(2, .25, .10, .10, .16)
	}
	return Matrix(3, .25, .10, .05, .10, .16, .02, .05, .02, .20)
}

// P12G returns the pilot matrix of the worked values in dimension 1 to 3.
func P12G(d int) mv.BandwidthMatrix {
	switch d {
	case 1:
		return Matrix(1, 0.16)
	case 2:
		return Matrix(2, .20, .05, .05, .12)
	}
	return Matrix(3, .20, .05, .03, .05, .12, .01, .03, .01, .15)
}

// Matrix returns the bandwidth matrix with the given row-major entries.
func Matrix(d int, h ...float64) mv.BandwidthMatrix { return must(mv.NewBandwidthMatrix(d, h)) }
