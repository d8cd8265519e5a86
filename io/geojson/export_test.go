package geojson

import (
	"io"

	"drumlin/spatial"
)

// The writers below the guard, for tests: a Release can only come from
// spatial.Guard.

func RegionsForTest(w io.Writer, r []spatial.Region, plane bool, m Meta) error {
	return writeRegions(w, r, setting{plane, 10, []float64{64, 64}}, m)
}

func ContoursForTest(w io.Writer, b []spatial.Band, plane bool, m Meta) error {
	return writeContours(w, b, setting{plane, 10, []float64{64, 64}}, m)
}

func PeaksForTest(w io.Writer, p []spatial.Peak, plane bool, m Meta) error {
	return writePeaks(w, p, setting{plane, 10, []float64{64, 64}}, m)
}

var AppendQuanta = appendQuanta
