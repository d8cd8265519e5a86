package geojson

import (
	"fmt"
	"io"
	"math"
	"strconv"

	"drumlin/spatial"
)

// Meta is what the release does not know about itself. The zero value writes 7
// decimals, no weights and the default unit.
type Meta struct {
	Weighted bool    // the run has weights: regions carry weight
	Decimals int     // of positions, 1 to 7; 0 means 7
	Unit     string  // of intensities; "" means "events per km2"
	Caution  string  // one sentence that travels in the file; "" for none
	Years    float64 // the events' period; above 0 intensities are given per year too
	sequence bool    // a text sequence instead of one collection
}

// yearly writes an intensity per year, where the period is known.
func (m Meta) yearly(e *encoder, name string, perKM2 float64) {
	if m.Years > 0 {
		e.number(name+"_per_km2_year", perKM2/m.Years)
	}
}

// WriteRegions writes regions.geojson: a MultiPolygon per highest density
// region, in rising content, with ids like "region-50".
func WriteRegions(w io.Writer, r *spatial.Release, meta Meta) error {
	return writeRegions(w, r.Regions(), settingOf(r), meta)
}

// WriteContours writes contours.geojson: a MultiPolygon per isoband, in rising
// intensity, with ids like "band-3".
func WriteContours(w io.Writer, r *spatial.Release, meta Meta) error {
	return writeContours(w, r.Bands(), settingOf(r), meta)
}

// WritePeaks writes peaks.geojson: a Point per mode, by rank, with ids like
// "peak-1".
func WritePeaks(w io.Writer, r *spatial.Release, meta Meta) error {
	return writePeaks(w, r.Peaks(), settingOf(r), meta)
}

// setting is what all collections of a release have in common.
type setting struct {
	plane     bool // metres without a place
	minEvents float64
	step      []float64 // of the lattice, metres
}

func settingOf(r *spatial.Release) setting {
	return setting{r.CRS().Method == "plane", r.Withheld().MinEvents, r.Surface().Step}
}

func writeRegions(w io.Writer, regions []spatial.Region, s setting, meta Meta) error {
	c, err := newCollection("regions", s, meta)
	if err != nil {
		return err
	}
	for i := range regions {
		if err := c.add(regionID(regions[i].Content), regions[i].Shape); err != nil {
			return err
		}
	}
	if len(regions) > 0 {
		c.rule = regions[0].Rule
	}
	return c.write(w, func(e *encoder, i int) {
		r := &regions[i]
		e.exact("content", r.Content)
		e.text("rule", r.Rule)
		e.number("threshold_per_km2", r.ThresholdPerKM2)
		e.number("area_km2", r.AreaKM2)
		e.count(r.Events)
		e.number("event_share", r.EventShare)
		if meta.Weighted {
			e.number("weight", r.Weight)
		}
		e.number("mass", r.Mass)
		e.number("mean_per_km2", r.MeanPerKM2)
		meta.yearly(e, "mean", r.MeanPerKM2)
	})
}

func writeContours(w io.Writer, bands []spatial.Band, s setting, meta Meta) error {
	c, err := newCollection("contours", s, meta)
	if err != nil {
		return err
	}
	for i := range bands {
		if err := c.add("band-"+strconv.Itoa(i+1), bands[i].Shape); err != nil {
			return err
		}
	}
	return c.write(w, func(e *encoder, i int) {
		b := &bands[i]
		e.number("from_per_km2", b.FromPerKM2)
		e.number("to_per_km2", b.ToPerKM2)
		meta.yearly(e, "from", b.FromPerKM2)
		meta.yearly(e, "to", b.ToPerKM2)
		e.number("area_km2", b.AreaKM2)
		e.count(b.Events)
	})
}

func writePeaks(w io.Writer, peaks []spatial.Peak, s setting, meta Meta) error {
	c, err := newCollection("peaks", s, meta)
	if err != nil {
		return err
	}
	for i := range peaks {
		if err := c.addPoint("peak-"+strconv.Itoa(peaks[i].Rank), peaks[i].Position); err != nil {
			return err
		}
	}
	return c.write(w, func(e *encoder, i int) {
		p := &peaks[i]
		e.exact("rank", float64(p.Rank))
		e.number("intensity_per_km2", p.IntensityPerKM2)
		e.number("standard_error_per_km2", p.StandardErrorPerKM2)
		e.number("smoothing_bias_per_km2", p.SmoothingBiasPerKM2)
		e.number("debiased_per_km2", p.DebiasedPerKM2)
		meta.yearly(e, "intensity", p.IntensityPerKM2)
		meta.yearly(e, "standard_error", p.StandardErrorPerKM2)
		if p.Region > 0 {
			e.exact("region", p.Region)
		} else {
			e.exact("region", math.NaN())
		}
		e.number("effective_events", p.EffectiveEvents)
	})
}

// regionID names a region by its content in per cent, without float residue.
func regionID(content float64) string {
	return "region-" + strconv.FormatFloat(math.Round(content*1e8)/1e6, 'f', -1, 64)
}

// write puts the whole collection out; props adds the properties of feature i.
func (c *collection) write(w io.Writer, props func(e *encoder, i int)) error {
	if c.meta.sequence {
		return c.writeSequence(w, props)
	}
	e := &encoder{w: w, decimals: c.decimals}
	e.raw(`{"type":"FeatureCollection",` + "\n")
	if box, ok := c.bbox(); ok {
		e.raw(`"bbox":[`)
		for i, v := range box {
			if i > 0 {
				e.raw(",")
			}
			e.quanta(v)
		}
		e.raw("],\n")
	}
	c.writeMember(e)
	e.raw(`"features":[`)
	for i := range c.shapes {
		if i > 0 {
			e.raw(",")
		}
		e.raw("\n")
		c.writeFeature(e, i, props)
	}
	if len(c.shapes) > 0 {
		e.raw("\n")
	}
	e.raw("]}\n")
	if err := e.flush(); err != nil {
		return fmt.Errorf("geojson: %s: %w", c.what, err)
	}
	return nil
}

func (c *collection) writeFeature(e *encoder, i int, props func(e *encoder, i int)) {
	e.raw(`{"type":"Feature","id":`)
	e.quoted(c.shapes[i].id)
	e.raw(`,"properties":{`)
	e.first = true
	props(e, i)
	e.raw(`},"geometry":`)
	c.writeGeometry(e, &c.shapes[i])
	e.raw("}")
}

// writeMember writes the foreign member with what a reader of the file alone
// should know.
func (c *collection) writeMember(e *encoder) {
	e.raw(`"drumlin":{`)
	e.first = true
	e.text("what", c.what)
	if c.rule != "" {
		e.text("rule", c.rule)
	}
	unit := c.meta.Unit
	if unit == "" {
		unit = "events per km2"
	}
	e.text("unit", unit)
	e.exact("min_events", c.setting.minEvents)
	if len(c.setting.step) == 2 {
		e.key("lattice_step_m")
		e.raw("[")
		e.significant(c.setting.step[0], 7)
		e.raw(",")
		e.significant(c.setting.step[1], 7)
		e.raw("]")
	}
	if c.setting.plane {
		e.text("positions", "metres on a plane without a place, not longitude and latitude")
	}
	if c.meta.Caution != "" {
		e.text("caution", c.meta.Caution)
	}
	e.raw("},\n")
}

func (c *collection) writeGeometry(e *encoder, s *shape) {
	switch {
	case s.point:
		e.raw(`{"type":"Point","coordinates":`)
		e.position(s.at)
		e.raw("}")
	case len(s.polygons) == 0:
		e.raw("null") // nothing is left after rounding
	default:
		e.raw(`{"type":"MultiPolygon","coordinates":[`)
		for i, p := range s.polygons {
			if i > 0 {
				e.raw(",")
			}
			e.raw("[")
			for j, ring := range p {
				if j > 0 {
					e.raw(",")
				}
				e.ring(ring)
			}
			e.raw("]")
		}
		e.raw("]}")
	}
}
