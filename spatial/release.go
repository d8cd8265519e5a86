package spatial

import (
	"drumlin/mv"

	"github.com/paulmach/orb"
)

// Ring is a closed curve on the plane, in metres; the first vertex is not
// repeated at the end. Exterior rings run anticlockwise, holes clockwise.
type Ring []XY

// Polygon is an exterior ring followed by its holes.
type Polygon []Ring

// MultiPolygon is a set of polygons whose interiors do not meet.
type MultiPolygon []Polygon

// Count is a number of events inside a shape, read from the tally's count
// nodes: the estimate and the bounds that certainly hold the true number.
type Count struct{ Estimate, Min, Max float64 }

// Region is a released highest density region.
type Region struct {
	Content         float64          // 0.5 for the 50 % region
	Rule            string           // "events" or "mass"
	ThresholdPerKM2 float64          // intensity on its border
	AreaKM2         float64          // on the equal-area plane
	Events          Count            // recorded events inside
	EventShare      float64          // Events.Estimate over all events mapped
	Weight          float64          // recorded weight inside (equals Events.Estimate without weights)
	Mass            float64          // probability of the estimate inside
	MeanPerKM2      float64          // mean intensity of the estimate inside
	Plane           MultiPolygon     // metres
	Shape           orb.MultiPolygon // degrees, as RFC 7946 wants it (metres for a plane without a place)
}

// Band is a released isoband: where the intensity lies between two levels.
type Band struct {
	FromPerKM2 float64
	ToPerKM2   float64 // +Inf for the highest
	AreaKM2    float64
	Events     Count
	Mass       float64
	Plane      MultiPolygon
	Shape      orb.MultiPolygon
}

// Peak is a released local maximum of the intensity.
type Peak struct {
	Rank                int // 1 = highest
	At                  XY
	Position            LonLat // degrees (metres for a plane without a place)
	IntensityPerKM2     float64
	StandardErrorPerKM2 float64
	SmoothingBiasPerKM2 float64 // leading term; negative where smoothing lowers the peak
	DebiasedPerKM2      float64
	EffectiveEvents     float64 // n * density / K_H(0)
	Region              float64 // content of the smallest released region that holds it, 0 if none
}

// Surface is the released intensity at the lattice's nodes, events per square
// kilometre, floored at the lowest released level.
type Surface struct {
	mv.Grid
	CRS CRS
}

// Withheld counts what the guard kept back, without places.
type Withheld struct {
	MinEvents   float64 // the threshold that was applied
	RegionParts int
	RegionHoles int
	BandParts   int
	BandHoles   int
	Peaks       int
	Regions     []float64 // contents of regions withheld whole

	Zones           int // zones without numbers because they hold few events
	ZonesComplement int // and so that those cannot be worked out
}

// Release is what may leave the program. Guard is its only constructor, and
// writers accept nothing else, so nothing unguarded can be written.
type Release struct {
	regions  []Region
	bands    []Band
	peaks    []Peak
	zones    []Zone
	surface  Surface
	withheld Withheld
	crs      CRS
}

// Regions returns the released regions in rising content.
func (r *Release) Regions() []Region { return r.regions }

// Bands returns the released isobands in rising intensity.
func (r *Release) Bands() []Band { return r.bands }

// Peaks returns the released peaks by rank.
func (r *Release) Peaks() []Peak { return r.peaks }

// Zones returns the zones in the order given, none when none were asked for.
func (r *Release) Zones() []Zone { return r.zones }

// Surface returns the released surface.
func (r *Release) Surface() Surface { return r.surface }

// Withheld returns what was kept back, by count.
func (r *Release) Withheld() Withheld { return r.withheld }

// CRS returns the plane of the estimate.
func (r *Release) CRS() CRS { return r.crs }
