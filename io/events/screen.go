package events

import "math"

// Kind says what the first two columns of a batch are.
type Kind uint8

const (
	// Geographic: longitude and latitude in degrees.
	Geographic Kind = iota
	// Planar: easting and northing in metres.
	Planar
)

// PlaneLimit is the largest planar coordinate taken for real, in metres.
const PlaneLimit = 1e8

// Screen keeps the rows that can be mapped. The zero value screens degrees
// without weights. It is a plain value and safe for sharing.
type Screen struct {
	Kind     Kind // what columns 0 (x) and 1 (y) are
	Weighted bool // column 2 is a weight, which must be finite and above zero
}

// Apply moves the good rows of the batch to the front of every column, in
// order, and returns how many there are; what lies behind them is undefined.
// The rows read, kept and set aside are added to the account. Each row is
// counted once, under the first Reason that holds. It panics when the batch
// lacks the columns it needs or they differ in length.
func (s Screen) Apply(b Batch, a *Account) int {
	need := 2
	if s.Weighted {
		need = 3
	}
	if len(b.Columns) < need {
		panic("events: screen needs x, y and, if weighted, a weight column")
	}
	n := b.Len()
	for _, c := range b.Columns {
		if len(c) != n {
			panic("events: columns of a batch differ in length")
		}
	}
	x, y := b.Columns[0], b.Columns[1]
	var w []float64
	if s.Weighted {
		w = b.Columns[2]
	}
	x0, x1, y0, y1, nowhere := -180.0, 360.0, -90.0, 90.0, 0.0
	if s.Kind == Planar {
		x0, x1, y0, y1, nowhere = -PlaneLimit, PlaneLimit, -PlaneLimit, PlaneLimit, math.NaN()
	}
	kept := 0
	for at := 0; at < n; {
		run := at
		if w == nil {
			run += goodRun(x[at:], y[at:], x0, x1, y0, y1, nowhere)
		} else {
			run += goodWeightedRun(x[at:], y[at:], w[at:], x0, x1, y0, y1, nowhere)
		}
		if run > at {
			if kept != at {
				for _, c := range b.Columns {
					copy(c[kept:], c[at:run])
				}
			}
			kept += run - at
		}
		if run == n {
			break
		}
		wv := 1.0
		if w != nil {
			wv = w[run]
		}
		a.SetAside[s.judge(x[run], y[run], wv)]++
		at = run + 1
	}
	a.Read += int64(n)
	a.Used += int64(kept)
	return kept
}

// goodRun returns how many leading rows lie within the box and not at (nowhere,
// nowhere); a NaN never lies within, nor is anything at NaN.
func goodRun(x, y []float64, x0, x1, y0, y1, nowhere float64) int {
	y = y[:len(x)]
	for i, v := range x {
		if u := y[i]; !(v >= x0 && v <= x1 && u >= y0 && u <= y1) || v == nowhere && u == nowhere {
			return i
		}
	}
	return len(x)
}

// goodWeightedRun is goodRun with weights above zero and finite.
func goodWeightedRun(x, y, w []float64, x0, x1, y0, y1, nowhere float64) int {
	y, w = y[:len(x)], w[:len(x)]
	for i, v := range x {
		u, m := y[i], w[i]
		if !(v >= x0 && v <= x1 && u >= y0 && u <= y1 && m > 0 && m <= math.MaxFloat64) || v == nowhere && u == nowhere {
			return i
		}
	}
	return len(x)
}

// judge names the first reason against a row known to be bad.
func (s Screen) judge(x, y, w float64) Reason {
	switch {
	case IsNull(x) || IsNull(y):
		return NullCoordinate
	case IsNotAValue(x) || IsNotAValue(y) || s.Weighted && IsNotAValue(w):
		return NotANumberText
	case x != x || y != y:
		return NotANumber
	case math.IsInf(x, 0) || math.IsInf(y, 0):
		return Infinite
	case s.Kind == Geographic && !(x >= -180 && x <= 360):
		return LongitudeRange
	case s.Kind == Geographic && !(y >= -90 && y <= 90):
		return LatitudeRange
	case s.Kind == Geographic && x == 0 && y == 0:
		return NullIsland
	case s.Kind == Planar && !(math.Abs(x) <= PlaneLimit && math.Abs(y) <= PlaneLimit):
		return BeyondPlane
	case IsNull(w):
		return WeightNull
	case w != w || math.IsInf(w, 0):
		return WeightNotFinite
	case w < 0:
		return WeightNegative
	}
	return WeightZero
}
