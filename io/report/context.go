package report

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"

	"drumlin/spatial"
)

// Limits of ReadContext.
const (
	ContextBytes     = 64 << 20
	ContextPositions = 4_000_000
)

// ErrContext: lines for orientation that cannot be read.
var ErrContext = errors.New("context lines")

// ReadContext reads the lines and the polygons' borders of a GeoJSON text, to
// be drawn beneath the map: features, collections and geometries of any depth
// up to 32; points are passed over. Positions are degrees, longitude first, or
// metres where the map has no place. Errors are ErrContext or those of r.
func ReadContext(r io.Reader) ([]spatial.LonLats, error) {
	text, err := io.ReadAll(io.LimitReader(r, ContextBytes+1))
	if err != nil {
		return nil, err
	}
	if len(text) > ContextBytes {
		return nil, fmt.Errorf("report: %w: more than %d bytes; simplify the file", ErrContext, ContextBytes)
	}
	c := &contextReader{}
	if err := c.object(text, 0); err != nil {
		return nil, fmt.Errorf("report: %w: %w", ErrContext, err)
	}
	return c.lines, nil
}

type contextReader struct {
	lines     []spatial.LonLats
	positions int
}

// object reads one GeoJSON object.
func (c *contextReader) object(text []byte, depth int) error {
	if depth > 32 {
		return errors.New("objects nest more than 32 deep")
	}
	var o struct {
		Type        string
		Features    []json.RawMessage
		Geometry    json.RawMessage
		Geometries  []json.RawMessage
		Coordinates json.RawMessage
	}
	if err := json.Unmarshal(text, &o); err != nil {
		return fmt.Errorf("not GeoJSON: %w", err)
	}
	inner := append(o.Features, o.Geometries...)
	switch o.Type {
	case "Feature":
		if len(o.Geometry) > 0 && string(o.Geometry) != "null" {
			inner = append(inner, o.Geometry)
		}
	case "LineString":
		return c.read(o.Coordinates, 0)
	case "MultiLineString", "Polygon":
		return c.read(o.Coordinates, 1)
	case "MultiPolygon":
		return c.read(o.Coordinates, 2)
	case "FeatureCollection", "GeometryCollection", "Point", "MultiPoint":
	default:
		return fmt.Errorf("type %q is not GeoJSON's", shown(o.Type))
	}
	for _, g := range inner {
		if err := c.object(g, depth+1); err != nil {
			return err
		}
	}
	return nil
}

// read takes a line (depth 0), or lists of them.
func (c *contextReader) read(text json.RawMessage, depth int) error {
	if depth > 0 {
		var parts []json.RawMessage
		if err := json.Unmarshal(text, &parts); err != nil {
			return fmt.Errorf("coordinates: %w", err)
		}
		for _, p := range parts {
			if err := c.read(p, depth-1); err != nil {
				return err
			}
		}
		return nil
	}
	var line [][]float64
	if err := json.Unmarshal(text, &line); err != nil {
		return fmt.Errorf("coordinates: %w", err)
	}
	if c.positions += len(line); c.positions > ContextPositions {
		return fmt.Errorf("more than %d positions; simplify the file", ContextPositions)
	}
	var l spatial.LonLats
	for _, p := range line {
		if len(p) < 2 {
			return fmt.Errorf("a position of %d numbers", len(p))
		}
		l.Lon, l.Lat = append(l.Lon, p[0]), append(l.Lat, p[1])
	}
	c.lines = append(c.lines, l)
	return nil
}

// ContextLines takes lines to the plane. A line is parted where it leaves the
// projection's domain and where it passes the edge of the plane (two positions
// less than half a turn apart that land far from each other).
func ContextLines(lines []spatial.LonLats, proj spatial.Projection) (out [][]spatial.XY) {
	const far = 5e6 // metres; no step of a coast or a border is as long
	placeless := proj.CRS().Method == "plane"
	for _, l := range lines {
		q := proj.Forward(spatial.LonLats{Lon: append([]float64(nil), l.Lon...), Lat: append([]float64(nil), l.Lat...)})
		var run []spatial.XY
		flush := func() {
			if len(run) > 1 {
				out = append(out, run)
			}
			run = nil
		}
		for i := range q.X {
			p := spatial.XY{X: q.X[i], Y: q.Y[i]}
			if math.IsNaN(p.X) || math.IsNaN(p.Y) || math.IsInf(p.X, 0) || math.IsInf(p.Y, 0) {
				flush()
				continue
			}
			if n := len(run); n > 0 && !placeless && math.Hypot(p.X-run[n-1].X, p.Y-run[n-1].Y) > far {
				flush()
			}
			run = append(run, p)
		}
		flush()
	}
	return out
}
