package pipeline

import (
	"os"

	"drumlin/io/events"
	"drumlin/io/report"
	"drumlin/spatial"
)

// contextLines reads the lines drawn beneath the map, if there are any; read
// before the long work, so that a wrong file is told of at once.
func contextLines(path string, proj spatial.Projection) ([][]spatial.XY, error) {
	if path == "" {
		return nil, nil
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, File: path, What: "the lines for orientation cannot be opened", Cause: err}
	}
	defer f.Close()
	lines, err := report.ReadContext(f)
	if err != nil {
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "the lines for orientation cannot be read", Remedy: "give GeoJSON lines or polygons in degrees", Cause: err}
	}
	return report.ContextLines(lines, proj), nil
}
