package spatial

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"drumlin/mv"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"
)

// ZoneArea is a named polygon to report on, such as a district; within the
// study area, when there is one (see StudyArea.Within).
type ZoneArea struct {
	ID   string
	Name string
	Area *StudyArea
}

// Zone is what a release says of a named polygon. When Withheld is not empty
// the numbers are NaN.
type Zone struct {
	ID            string
	Name          string
	AreaKM2       float64
	Expected      float64 // events (weight, with weights) that the estimate places in it
	Events        Count   // recorded in it
	EventShare    float64 // Events.Estimate over all events mapped
	MeanPerKM2    float64 // mean intensity of the estimate
	HighestPerKM2 float64 // highest released intensity at a lattice node; 0 below the lowest released level
	Withheld      string  // "", "few events", or "so that another cannot be worked out"
	Plane         MultiPolygon
	Shape         orb.MultiPolygon
}

// Reasons for a withheld zone.
const (
	zoneFew        = "few events"
	zoneComplement = "so that another cannot be worked out"
)

// Within returns the part of an area that lies in w, nil when there is none.
func (w *StudyArea) Within(o *StudyArea) (*StudyArea, error) {
	g, err := geom.Intersection(w.geometry(), o.geometry())
	if err != nil {
		return nil, fmt.Errorf("spatial: the part within the study area cannot be found: %w: %w", err, ErrStudyArea)
	}
	out := &StudyArea{unit: w.unit}
	flat := out.polygonsOf(g)
	if len(flat) == 0 {
		return nil, nil
	}
	if flat, err = out.unite(flat); err != nil {
		return nil, err
	}
	return out, out.finish(flat)
}

func (w *StudyArea) geometry() geom.Geometry {
	parts := make([]geom.Polygon, len(w.plane))
	for i, p := range w.plane {
		parts[i] = planeGeom(p)
	}
	return geom.NewMultiPolygon(parts).AsGeometry()
}

// addZones measures the zones and withholds those that certainly hold fewer
// than p.MinEvents events. One withheld zone alone would be the total less the
// others, so where nearly all events lie in zones the next smallest are
// withheld with it, until they are two and hold MinEvents between them. Zones
// that overlap are judged one by one.
func (r *Release) addZones(a Analysis, p Policy, proj Projection) error {
	if len(a.Zones) == 0 {
		return nil
	}
	counts := a.FineCounts
	if len(counts.Values) == 0 {
		counts = a.Counts
	}
	hat := func(l mv.Lattice) mv.Grid { // what a node's hat has of the study area
		if a.Area != nil {
			return a.Area.Mask(l)
		}
		g := mv.NewGrid(l)
		for i := range g.Values {
			g.Values[i] = l.CellVolume()
		}
		return g
	}
	fine, coarse := hat(counts.Lattice), hat(a.Density.Lattice)
	covered := make([]bool, len(counts.Values))
	for _, q := range a.Zones {
		z := Zone{ID: q.ID, Name: q.Name, AreaKM2: q.Area.Area() / perKM2, Plane: q.Area.plane}
		var err error
		if z.Shape, err = clippedShape(z.Plane, proj); err != nil {
			return fmt.Errorf("zone %q: %w", cmp.Or(q.Name, q.ID), err)
		}
		if !proj.EqualArea() {
			z.AreaKM2 = EllipsoidArea(z.Shape) / perKM2
		}
		for i, v := range q.Area.Mask(counts.Lattice).Values {
			c := counts.Values[i]
			if v == 0 || c == 0 {
				continue
			}
			covered[i] = true
			z.Events.Max += c
			if fine.Values[i] <= 0 || v >= fine.Values[i]*(1-1e-9) {
				z.Events.Min += c
				z.Events.Estimate += c
				continue
			}
			z.Events.Estimate += c * v / fine.Values[i]
		}
		for i, v := range q.Area.Mask(a.Density.Lattice).Values {
			if v == 0 {
				continue
			}
			z.Expected += v * a.Density.Values[i] * a.Total
			if s := r.surface.Values[i]; v >= coarse.Values[i]/2 && s > z.HighestPerKM2 {
				z.HighestPerKM2 = s
			}
		}
		z.MeanPerKM2 = z.Expected / q.Area.Area() * perKM2
		if a.Events > 0 {
			z.EventShare = z.Events.Estimate / a.Events
		}
		r.zones = append(r.zones, z)
	}
	var beyond float64
	for i, c := range counts.Values {
		if !covered[i] {
			beyond += c
		}
	}
	r.withholdZones(p.MinEvents, beyond)
	return nil
}

// withholdZones blanks what must not be told; beyond is how many events
// certainly lie in no zone.
func (r *Release) withholdZones(least, beyond float64) {
	if !(least > 1) {
		return
	}
	order := make([]int, len(r.zones))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(x, y int) int {
		return cmp.Compare(r.zones[x].Events.Min, r.zones[y].Events.Min)
	})
	withheld, together := 0, beyond
	for _, i := range order {
		z := &r.zones[i]
		switch {
		case z.Events.Min < least:
			z.Withheld = zoneFew
			r.withheld.Zones++
		case withheld > 0 && beyond < least && (withheld < 2 || together < least):
			z.Withheld = zoneComplement
			r.withheld.ZonesComplement++
		default:
			continue
		}
		withheld++
		together += z.Events.Min
	}
	nan := math.NaN()
	for i := range r.zones {
		if z := &r.zones[i]; z.Withheld != "" {
			z.Expected, z.EventShare, z.MeanPerKM2, z.HighestPerKM2 = nan, nan, nan, nan
			z.Events = Count{nan, nan, nan}
		}
	}
}
