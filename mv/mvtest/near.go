package mvtest

import (
	"math"
	"testing"
)

// Near fails the test, printing the size of the error, unless got is within
// rel*|want| of want.
func Near(t testing.TB, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s = %.12g, want %.12g: off by %.3g, relative %.3g, allowed %.3g",
			what, got, want, got-want, math.Abs(got-want)/math.Abs(want), rel)
	}
}

// NearAbs fails the test, printing the size of the error, unless got is within
// abs of want.
func NearAbs(t testing.TB, what string, got, want, abs float64) {
	t.Helper()
	if !(math.Abs(got-want) <= abs) {
		t.Errorf("%s = %.12g, want %.12g: off by %.3g, allowed %.3g", what, got, want, got-want, abs)
	}
}

// Printed fails unless got agrees with a value printed to the given number of
// significant digits, half a unit of the last one and a little rounding.
func Printed(t testing.TB, what string, got, want float64, digits int) {
	t.Helper()
	if want == 0 {
		NearAbs(t, what, got, 0, math.Pow(10, float64(-digits)))
		return
	}
	unit := math.Pow(10, math.Floor(math.Log10(math.Abs(want)))-float64(digits-1))
	NearAbs(t, what, got, want, 0.51*unit+1e-14*math.Abs(want))
}
