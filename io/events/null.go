package events

import "math"

const (
	nullBits      = 0x7ff8_0000_0dea_0001
	notAValueBits = 0x7ff8_0000_0dea_0002
	notAPointBits = 0x7ff8_0000_0dea_0003
)

var (
	// Null is the NaN that stands for an absent value. Compare with IsNull,
	// never with ==.
	Null = math.Float64frombits(nullBits)
	// NotAValue is the NaN that stands for a cell of text that is no number in
	// a column of numbers. Compare with IsNotAValue.
	NotAValue = math.Float64frombits(notAValueBits)
	// OtherShape is the NaN that stands for the coordinates of a geometry that
	// is no point. Compare with IsOtherShape.
	OtherShape = math.Float64frombits(notAPointBits)
)

// IsNull reports whether v is the NaN Null, bit for bit.
func IsNull(v float64) bool { return math.Float64bits(v) == nullBits }

// IsNotAValue reports whether v is the NaN NotAValue, bit for bit.
func IsNotAValue(v float64) bool { return math.Float64bits(v) == notAValueBits }

// IsOtherShape reports whether v is the NaN OtherShape, bit for bit.
func IsOtherShape(v float64) bool { return math.Float64bits(v) == notAPointBits }
