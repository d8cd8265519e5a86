package report

import (
	"encoding/json"
	"fmt"
	"html/template"
	"regexp"
	"strings"
)

// facts are the account a reviewer checks: rows, settings, place, numbers,
// versions. They repeat the record.
func facts(p *Page) []factGroup {
	rec := p.Record
	text := func(s string) template.HTML { return foreign(s) }
	rows := []fact{
		{"rows read", data("run/rows/read", exact(float64(rec.Rows.Read)), count(float64(rec.Rows.Read)))},
		{"on the map", data("run/rows/used", exact(float64(rec.Rows.Used)), count(float64(rec.Rows.Used)))},
	}
	for i, s := range rec.Rows.SetAside {
		rows = append(rows, fact{"set aside: " + shown(s.Reason), data(fmt.Sprintf("run/rows/set_aside/%d/rows", i), exact(float64(s.Rows)), count(float64(s.Rows)))})
	}
	rows = append(rows,
		fact{"far from all others", data("run/rows/outside_extent", exact(float64(rec.Rows.OutsideExtent)), count(float64(rec.Rows.OutsideExtent)))},
		fact{"effective events", data("run/tally/effective_events", exact(rec.Tally.EffectiveN), level6(rec.Tally.EffectiveN))},
	)
	settings := []fact{}
	for _, s := range rec.Settings {
		settings = append(settings, fact{shown(s.Name), text(settingText(s.Value))})
	}
	c := rec.CRS
	place := []fact{{"coordinates as read", text(c.Input)}, {"plane of the estimate", text(strings.TrimSpace(c.Plane.ID + " " + c.Plane.Name))}}
	if c.Plane.EqualArea {
		place = append(place, fact{"areas", "true on this plane"})
	} else {
		place = append(place, fact{"areas", "measured on the ellipsoid, for this plane distorts them"})
	}
	if d := c.Distortion; d != nil {
		place = append(place,
			fact{"lengths on the plane", data("run/crs/distortion/scale_least", exact(d.ScaleLeast), significant(d.ScaleLeast, 4)) + " to " + data("run/crs/distortion/scale_greatest", exact(d.ScaleGreatest), significant(d.ScaleGreatest, 4)) + " times true length"},
			fact{"angles bent by up to", data("run/crs/distortion/angle_greatest_deg", exact(d.Angle), significant(d.Angle, 2)+"°")})
	}
	b := rec.Bandwidth
	numbers := []fact{
		{"bandwidth matrix, m²", matrixText("run/bandwidth/matrix_m2", b.Matrix)},
		{"the same, exact", template.HTML("<code>" + string(foreign(strings.Join(b.MatrixHex, "  "))) + "</code>")},
		{"kernel", text(b.Kernel)},
		{"search", text(fmt.Sprintf("%s after %d evaluations", b.Status, b.Evaluations))},
		{"lattice steps per minor scale", data("run/bandwidth/steps_per_minor_scale", exact(b.StepsPerMinorScale), significant(b.StepsPerMinorScale, 3))},
		{"error from the lattice, of the highest value", data("run/bandwidth/lattice_error", exact(b.LatticeError), significant(b.LatticeError, 2))},
	}
	if a := b.AMISE; a != nil {
		numbers = append(numbers, fact{"estimated squared bias and variance", data("run/bandwidth/amise/squared_bias", exact(a.SquaredBias), fmt.Sprintf("%.3g", a.SquaredBias)) + " and " + data("run/bandwidth/amise/variance", exact(a.Variance), fmt.Sprintf("%.3g", a.Variance)) + " per m²"})
	}
	if l := rec.Lattice; len(l.Nodes) == 2 && len(l.Step) == 2 {
		numbers = append(numbers, fact{"lattice", template.HTML(fmt.Sprintf("%d by %d nodes, step %s", l.Nodes[0], l.Nodes[1], template.HTMLEscapeString(lengthText(l.Step[0]))))})
	}
	for _, n := range b.Notes {
		numbers = append(numbers, fact{"note", text(n)})
	}
	g := rec.Guard
	guard := []fact{
		{"least events for a part, hole or peak", data("run/guard/min_events", exact(g.MinEvents), level6(g.MinEvents))},
		{"parts kept back (regions, bands)", template.HTML(fmt.Sprintf("%d, %d", g.RegionParts, g.BandParts))},
		{"holes kept back (regions, bands)", template.HTML(fmt.Sprintf("%d, %d", g.RegionHoles, g.BandHoles))},
		{"peaks kept back", data("run/guard/peaks_withheld", fmt.Sprint(g.Peaks), fmt.Sprint(g.Peaks))},
	}
	pr := rec.Program
	versions := []fact{{shown(pr.Name), text(strings.TrimSpace(pr.Version + " " + pr.Commit))}, {"Go", text(pr.Go)}}
	for _, d := range pr.Dependencies {
		versions = append(versions, fact{shown(d.Module), text(d.Version)})
	}
	return []factGroup{{"Rows", rows}, {"Place and plane", place}, {"Bandwidth and lattice", numbers}, {"Small-number guard", guard}, {"Settings", settings}, {"Versions", versions}}
}

// matrixText prints the rows of a symmetric matrix, each entry with its own
// number.
func matrixText(of string, m []float64) template.HTML {
	var parts []string
	for i, v := range m {
		parts = append(parts, string(data(fmt.Sprintf("%s/%d", of, i), exact(v), significant(v, 6))))
	}
	if len(parts) == 4 {
		return template.HTML(parts[0] + ", " + parts[1] + "; " + parts[2] + ", " + parts[3])
	}
	return template.HTML(strings.Join(parts, ", "))
}

// settingText prints a setting as one would type it.
func settingText(v any) string {
	switch t := v.(type) {
	case string:
		if t == "" {
			return "none"
		}
		return t
	case []string:
		return strings.Join(t, ", ")
	}
	b, err := json.Marshal(v)
	if err != nil {
		return fmt.Sprint(v)
	}
	return strings.NewReplacer("[", "", "]", "", ",", ", ", `"`, "").Replace(string(b))
}

var fileWhat = map[string]string{
	"regions.geojson":     "the regions, for a GIS",
	"contours.geojson":    "the bands of intensity, for a GIS",
	"peaks.geojson":       "the peaks with their errors, for a GIS",
	"surface.tif":         "intensity on a lattice, GeoTIFF",
	"surface.parquet":     "intensity on a lattice, a table",
	"zones.geojson":       "named zones with events and intensity",
	"regions.fgb":         "the regions, FlatGeobuf",
	"contours.fgb":        "the bands of intensity, FlatGeobuf",
	"peaks.fgb":           "the peaks, FlatGeobuf",
	"regions.parquet":     "the regions, GeoParquet",
	"contours.parquet":    "the bands of intensity, GeoParquet",
	"peaks.parquet":       "the peaks, GeoParquet",
	"regions.geojsonseq":  "the regions, one feature a record",
	"contours.geojsonseq": "the bands, one feature a record",
	"peaks.geojsonseq":    "the peaks, one feature a record",
}

// plainName is a file of the bundle that may be linked to.
var plainName = regexp.MustCompile(`^[A-Za-z0-9_][A-Za-z0-9_./-]*$`)

func fileRows(p *Page) (rows []fileRow) {
	files := p.Files
	if files == nil {
		files = p.Record.Files
	}
	for _, f := range files {
		rows = append(rows, fileRow{shown(f.Name), fileWhat[f.Name], count(float64(f.Bytes)) + " bytes", shown(f.SHA256), plainName.MatchString(f.Name)})
	}
	return append(rows, fileRow{Name: "run.json", What: "the record: how every number came about", Link: true})
}
