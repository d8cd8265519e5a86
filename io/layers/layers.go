// Package layers turns a release into plain tables of features, for the formats
// that hold one: FlatGeobuf, GeoParquet. Columns, their names and the rounding
// of their values are those of the GeoJSON files.
//
// Positions are WGS 84 degrees, or metres for a plane without a place. A value
// that is not known, or has no limit, is absent (nil).
package layers

import (
	"math"
	"strconv"

	"github.com/paulmach/orb"

	"drumlin/spatial"
)

// Kind is what a column holds.
type Kind uint8

// The kinds of column.
const (
	Text   Kind = iota // string
	Number             // float64
	Whole              // int64
)

// Field is a column besides id and geometry.
type Field struct {
	Name string
	Kind Kind
}

// Feature is one row. Values has one entry for each field: string, float64,
// int64, or nil when absent.
type Feature struct {
	ID     string
	Shape  orb.Geometry // Point or MultiPolygon, exterior rings anticlockwise
	Values []any
}

// Layer is one table.
type Layer struct {
	Name     string
	Title    string // for people, with the unit
	Points   bool   // geometries are points, else multipolygons
	Plane    bool   // metres without a place
	Fields   []Field
	Features []Feature
}

// Meta is what the release does not know about itself.
type Meta struct {
	Weighted bool
	Unit     string // of intensities; "" means "events per km2"
}

// Bound returns the box around all features, false without positions.
func (l *Layer) Bound() (orb.Bound, bool) {
	var b orb.Bound
	any := false
	for _, f := range l.Features {
		if m, ok := f.Shape.(orb.MultiPolygon); ok && len(m) == 0 {
			continue
		}
		if !any {
			b, any = f.Shape.Bound(), true
			continue
		}
		b = b.Union(f.Shape.Bound())
	}
	return b, any
}

// Names lists the layers of a release, in the order in which they are written;
// zones is empty unless they were asked for.
func Names() []string { return []string{"regions", "contours", "peaks", "zones"} }

// Of returns a layer of a release by name; it panics on an unknown one.
func Of(r *spatial.Release, name string, m Meta) Layer {
	switch name {
	case "regions":
		return Regions(r, m)
	case "contours":
		return Contours(r, m)
	case "peaks":
		return Peaks(r, m)
	case "zones":
		return Zones(r, m)
	}
	panic("layers: no layer named " + name)
}

type table struct {
	l   Layer
	row []any
}

func newTable(r *spatial.Release, name, what string, m Meta) *table {
	unit := m.Unit
	if unit == "" {
		unit = "events per km2"
	}
	return &table{l: Layer{Name: name, Title: what + ", " + unit, Plane: r.CRS().Method == "plane"}}
}

func (t *table) put(name string, k Kind, v any) {
	if len(t.l.Features) == 0 {
		t.l.Fields = append(t.l.Fields, Field{name, k})
	}
	t.row = append(t.row, v)
}

func (t *table) text(name, v string) { t.put(name, Text, v) }

// exact is a value that was chosen, number one that was measured: those have
// seven significant digits.
func (t *table) exact(name string, v float64) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		t.put(name, Number, nil)
		return
	}
	t.put(name, Number, v)
}

func (t *table) number(name string, v float64) {
	if v != 0 && !math.IsNaN(v) && !math.IsInf(v, 0) {
		v, _ = strconv.ParseFloat(strconv.FormatFloat(v, 'e', 6, 64), 64)
	}
	t.exact(name, v)
}

func (t *table) count(c spatial.Count) {
	const residue = 1e-6
	if math.IsNaN(c.Estimate) { // withheld
		for _, name := range []string{"events", "events_min", "events_max"} {
			t.put(name, Whole, nil)
		}
		return
	}
	t.put("events", Whole, int64(math.Round(c.Estimate)))
	t.put("events_min", Whole, int64(max(0, math.Floor(c.Min+residue))))
	t.put("events_max", Whole, int64(math.Ceil(c.Max-residue)))
}

func (t *table) end(id string, shape orb.Geometry) {
	t.l.Features = append(t.l.Features, Feature{id, shape, t.row})
	t.row = nil
}

// Regions is the layer of highest density regions.
func Regions(r *spatial.Release, m Meta) Layer {
	t := newTable(r, "regions", "highest density regions", m)
	for _, g := range r.Regions() {
		t.exact("content", g.Content)
		t.text("rule", g.Rule)
		t.number("threshold_per_km2", g.ThresholdPerKM2)
		t.number("area_km2", g.AreaKM2)
		t.count(g.Events)
		t.number("event_share", g.EventShare)
		if m.Weighted {
			t.number("weight", g.Weight)
		}
		t.number("mass", g.Mass)
		t.number("mean_per_km2", g.MeanPerKM2)
		t.end("region-"+strconv.FormatFloat(math.Round(g.Content*1e8)/1e6, 'f', -1, 64), g.Shape)
	}
	return t.l
}

// Contours is the layer of isobands.
func Contours(r *spatial.Release, m Meta) Layer {
	t := newTable(r, "contours", "bands of intensity", m)
	for i, b := range r.Bands() {
		t.number("from_per_km2", b.FromPerKM2)
		t.number("to_per_km2", b.ToPerKM2)
		t.number("area_km2", b.AreaKM2)
		t.count(b.Events)
		t.end("band-"+strconv.Itoa(i+1), b.Shape)
	}
	return t.l
}

// Peaks is the layer of modes.
func Peaks(r *spatial.Release, m Meta) Layer {
	t := newTable(r, "peaks", "peaks of intensity", m)
	t.l.Points = true
	for _, p := range r.Peaks() {
		t.put("rank", Whole, int64(p.Rank))
		t.number("intensity_per_km2", p.IntensityPerKM2)
		t.number("standard_error_per_km2", p.StandardErrorPerKM2)
		t.number("smoothing_bias_per_km2", p.SmoothingBiasPerKM2)
		t.number("debiased_per_km2", p.DebiasedPerKM2)
		region := p.Region
		if !(region > 0) {
			region = math.NaN()
		}
		t.exact("region", region)
		t.number("effective_events", p.EffectiveEvents)
		t.end("peak-"+strconv.Itoa(p.Rank), orb.Point{p.Position.Lon, p.Position.Lat})
	}
	return t.l
}

// Zones is the layer of named polygons.
func Zones(r *spatial.Release, m Meta) Layer {
	t := newTable(r, "zones", "named zones", m)
	for i, z := range r.Zones() {
		t.text("name", z.Name)
		t.number("area_km2", z.AreaKM2)
		t.number("expected", z.Expected)
		t.count(z.Events)
		t.number("event_share", z.EventShare)
		t.number("mean_per_km2", z.MeanPerKM2)
		t.number("highest_per_km2", z.HighestPerKM2)
		t.text("withheld", z.Withheld)
		id := z.ID
		if id == "" {
			id = "zone-" + strconv.Itoa(i+1)
		}
		t.end(id, z.Shape)
	}
	return t.l
}
