package geoparquet

import (
	"fmt"
	"io"
	"strconv"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/spatial"
)

// WriteSurface writes the released intensity as a table of nodes: x, y (metres
// on the plane of the estimate), lon, lat (degrees; not for a plane without a
// place) and intensity (events per square kilometre), from south to north and
// west to east. Nodes outside the study area are left out.
func WriteSurface(w io.Writer, r *spatial.Release, proj spatial.Projection, unit string) error {
	s := r.Surface()
	plane := s.CRS.Method == "plane"
	names := []string{"x", "y", "lon", "lat", "intensity"}
	if plane {
		names = []string{"x", "y", "intensity"}
	}
	var fields schema.FieldList
	var cols []*column
	for _, name := range names {
		fields = append(fields, schema.NewFloat64Node(name, parquet.Repetitions.Required, -1))
		cols = append(cols, &column{})
	}
	nx := s.N[0]
	var x, y, v []float64
	for i, f := range s.Values {
		if finite(f) {
			x, y, v = append(x, s.Coord(0, i%nx)), append(y, s.Coord(1, i/nx)), append(v, f)
		}
	}
	cols[0].floats, cols[1].floats, cols[len(cols)-1].floats = x, y, v
	if !plane {
		q := proj.Inverse(spatial.XYs{X: append([]float64(nil), x...), Y: append([]float64(nil), y...)})
		for i := range q.Lon {
			if q.Lon[i] > 180 {
				q.Lon[i] -= 360
			} else if q.Lon[i] < -180 {
				q.Lon[i] += 360
			}
			if !finite(q.Lon[i]) || !finite(q.Lat[i]) {
				return fmt.Errorf("geoparquet: surface: node %g, %g has no place: %w", x[i], y[i], ErrWrite)
			}
		}
		cols[2].floats, cols[3].floats = q.Lon, q.Lat
	}
	if unit == "" {
		unit = "events per km2"
	}
	err := writeFile(w, fields, cols, len(v), [2]string{"unit", unit}, [2]string{"plane", s.CRS.Name},
		[2]string{"step_m", strconv.FormatFloat(s.Step[0], 'g', -1, 64) + " " + strconv.FormatFloat(s.Step[1], 'g', -1, 64)})
	if err != nil {
		return fmt.Errorf("geoparquet: surface: %w", err)
	}
	return nil
}
