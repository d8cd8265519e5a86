package geojson

import (
	"fmt"
	"io"

	"drumlin/spatial"
)

// WriteRegionsSequence writes the regions as a GeoJSON text sequence (RFC
// 8142): before each feature a record separator, after it a line feed. Features
// are those of WriteRegions to the byte.
func WriteRegionsSequence(w io.Writer, r *spatial.Release, meta Meta) error {
	meta.sequence = true
	return WriteRegions(w, r, meta)
}

// WriteContoursSequence writes the isobands as a GeoJSON text sequence.
func WriteContoursSequence(w io.Writer, r *spatial.Release, meta Meta) error {
	meta.sequence = true
	return WriteContours(w, r, meta)
}

// WritePeaksSequence writes the peaks as a GeoJSON text sequence.
func WritePeaksSequence(w io.Writer, r *spatial.Release, meta Meta) error {
	meta.sequence = true
	return WritePeaks(w, r, meta)
}

// recordSeparator begins every text of a sequence.
const recordSeparator = "\x1e"

// writeSequence puts the features out one by one.
func (c *collection) writeSequence(w io.Writer, props func(e *encoder, i int)) error {
	e := &encoder{w: w, decimals: c.decimals}
	for i := range c.shapes {
		e.raw(recordSeparator)
		c.writeFeature(e, i, props)
		e.raw("\n")
	}
	if err := e.flush(); err != nil {
		return fmt.Errorf("geojson: %s: %w", c.what, err)
	}
	return nil
}
