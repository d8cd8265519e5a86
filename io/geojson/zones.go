package geojson

import (
	"io"
	"strconv"

	"drumlin/spatial"
)

// WriteZones writes zones.geojson: a MultiPolygon per named zone, in the order
// given, with the zone's own id or ids like "zone-1". The numbers of a zone that
// the guard withheld are null, and the member withheld says why.
func WriteZones(w io.Writer, r *spatial.Release, meta Meta) error {
	return writeZones(w, r.Zones(), settingOf(r), meta)
}

// WriteZonesSequence writes the zones as a GeoJSON text sequence.
func WriteZonesSequence(w io.Writer, r *spatial.Release, meta Meta) error {
	meta.sequence = true
	return WriteZones(w, r, meta)
}

func writeZones(w io.Writer, zones []spatial.Zone, s setting, meta Meta) error {
	c, err := newCollection("zones", s, meta)
	if err != nil {
		return err
	}
	for i := range zones {
		id := zones[i].ID
		if id == "" {
			id = "zone-" + strconv.Itoa(i+1)
		}
		if err := c.add(id, zones[i].Shape); err != nil {
			return err
		}
	}
	return c.write(w, func(e *encoder, i int) {
		z := &zones[i]
		e.text("name", z.Name)
		e.number("area_km2", z.AreaKM2)
		e.number("expected", z.Expected)
		e.count(z.Events)
		e.number("event_share", z.EventShare)
		e.number("mean_per_km2", z.MeanPerKM2)
		e.number("highest_per_km2", z.HighestPerKM2)
		e.text("withheld", z.Withheld)
	})
}
