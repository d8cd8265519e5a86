package spatial

import "drumlin/mv"

// Analysis is what the estimate says before the guard has seen it. All grids
// lie on one planar lattice in metres (axis 0 east, axis 1 north).
type Analysis struct {
	Density mv.Grid // probability per square metre, integrates to 1
	Counts  mv.Grid // events per node: the tally's linear binning weights of the unweighted count
	Weights mv.Grid // the same for weights; no values when the run has none
	// FineCounts, when it has values, are the same events binned on a refinement
	// of the lattice (r - 1 more nodes in every gap, r up to 64). The guard's
	// bounds are then read from it: they tighten with r, and a band narrower
	// than two steps of Counts can hold no event for certain.
	FineCounts mv.Grid

	// Area, when given, is where events could be observed: all events lie in it,
	// the density goes on a few nodes beyond its border, and regions, bands and
	// surface end there.
	Area *StudyArea

	Events float64 // events mapped, n
	Total  float64 // their total weight; Events when the run has no weights

	KernelAtZero float64 // K_H(0), per square metre

	RegionRule string      // "events" or "mass"
	Regions    []Threshold // rising content, falling density
	BandLevels []float64   // rising densities, per square metre; the lowest is the edge of what is drawn

	Peaks []Summit // highest first
	Zones []ZoneArea
}

// Threshold is the density on the border of a highest density region.
type Threshold struct {
	Content float64 // 0.5 for the 50 % region
	Density float64 // probability per square metre
}

// Summit is a local maximum of the density with its error, per square metre.
type Summit struct {
	At            XY
	Density       float64
	StandardError float64
	SmoothingBias float64 // leading term ½ tr(H Hess f); NaN where an edge makes it unknown
	Inside        float64 // kernel mass within the study area there; 0 means all
}

// Policy is what the guard enforces.
type Policy struct {
	MinEvents float64 // least events for every polygon part, hole and peak; 1 or less switches the guard off
	Workers   int     // goroutines; default all CPUs. The release does not depend on it
}
