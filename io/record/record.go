package record

import (
	"time"
)

// Kind is the value of the member "record" that marks a file as ours.
const Kind = "drumlin run"

// Version is the layout version written and read by this package.
const Version = 1

// Record is the content of run.json. The zero value fails Validate; fields may
// be filled in any order. A Record aliases the slices put into it and is not
// safe for concurrent change.
type Record struct {
	Kind        string        `json:"record"`         // Kind; filled by Write when empty
	Version     int           `json:"record_version"` // Version; filled by Write when 0
	Program     Program       `json:"program"`
	Settings    Settings      `json:"settings"`
	Rows        Rows          `json:"rows"`
	Period      *Period       `json:"period,omitempty"` // nil without a column of times
	CRS         CRS           `json:"crs"`
	Tally       Tally         `json:"tally"`
	Lattice     Lattice       `json:"lattice"`
	Bandwidth   Bandwidth     `json:"bandwidth"`
	Regions     Regions       `json:"regions"`
	StudyArea   *StudyArea    `json:"study_area,omitempty"`
	Zones       *Zones        `json:"zones,omitempty"`
	Sensitivity []Sensitivity `json:"sensitivity,omitempty"`
	Guard       Guard         `json:"guard"`
	Warnings    []string      `json:"warnings,omitempty"` // about this run
	Cautions    []string      `json:"cautions"`           // about every such map
	Files       []File        `json:"files"`              // all but run.json and Times.Files, by name

	Inputs  []Input `json:"inputs"`
	Workers int     `json:"workers"`
	Times   Times   `json:"times"`
}

// Program says what made the bundle.
type Program struct {
	Name         string       `json:"name"`
	Version      string       `json:"version"`
	Commit       string       `json:"commit,omitempty"`
	Go           string       `json:"go"`
	Dependencies []Dependency `json:"dependencies,omitempty"`
}

// Dependency is one module linked into the program.
type Dependency struct {
	Module  string `json:"module"`
	Version string `json:"version"`
}

// Input is one file or stream the events came from.
type Input struct {
	Path   string `json:"path"` // as given
	Format string `json:"format"`
	Bytes  int64  `json:"bytes"` // -1 for a stream
	Rows   int64  `json:"rows"`  // rows read from it
	Digest Digest `json:"digest"`
}

// Rows accounts for every row read: Read = Used + the rows set aside +
// OutsideExtent.
type Rows struct {
	Read          int64      `json:"read"`
	Used          int64      `json:"used"`
	SetAside      []SetAside `json:"set_aside"`      // by reason, in a fixed order
	OutsideExtent int64      `json:"outside_extent"` // far strays cut from the finished tally
}

// SetAside is the number of rows left out for one reason.
type SetAside struct {
	Reason string `json:"reason"`
	Rows   int64  `json:"rows"`
}

// Period says what time the events used are from. Times carry the offset of
// the zone.
type Period struct {
	Column string  `json:"column"`
	Zone   string  `json:"zone"`            // of times without an offset
	From   string  `json:"from,omitempty"`  // start of the window asked for, part of it
	Until  string  `json:"until,omitempty"` // its end, not part of it
	First  string  `json:"first"`           // earliest event
	Last   string  `json:"last"`            // latest
	Years  float64 `json:"years"`           // length of the window, from the first or to the last event where it is open
}

// CRS says where the numbers stand on the ground.
type CRS struct {
	Input      string      `json:"input"` // of the coordinates read: "EPSG:4326", "plane"
	Plane      Plane       `json:"plane"`
	Distortion *Distortion `json:"distortion,omitempty"` // nil on a plane without a place
}

// Plane is the plane of the estimate with all its parameters.
type Plane struct {
	ID        string  `json:"id,omitempty"` // "EPSG:3035", none for a plane without a code
	Name      string  `json:"name"`
	Method    string  `json:"method"` // "LAEA", "TM", "LCC", "AEA", "WebMercator", "plane"
	Ellipsoid string  `json:"ellipsoid,omitempty"`
	Lat0      float64 `json:"lat0_deg"`
	Lon0      float64 `json:"lon0_deg"`
	Lat1      float64 `json:"lat1_deg"`
	Lat2      float64 `json:"lat2_deg"`
	K0        float64 `json:"k0"`
	FE        float64 `json:"false_easting_m"`
	FN        float64 `json:"false_northing_m"`
	EqualArea bool    `json:"equal_area"`
}

// Distortion bounds what the plane does to lengths, areas and angles over the
// mapped extent; 1 is true scale.
type Distortion struct {
	ScaleLeast    float64 `json:"scale_least"`
	ScaleGreatest float64 `json:"scale_greatest"`
	AreaLeast     float64 `json:"area_least"`
	AreaGreatest  float64 `json:"area_greatest"`
	Angle         float64 `json:"angle_greatest_deg"`
}

// Tally describes the additive summary all later stages read.
type Tally struct {
	Grain       float64 `json:"grain_m"` // coordinates are rounded to it
	Step        float64 `json:"step_m"`  // between nodes
	Events      int64   `json:"events"`
	Weight      float64 `json:"weight"` // equals events without weights
	EffectiveN  float64 `json:"effective_events"`
	Nodes       int64   `json:"nodes"`        // occupied
	LeftOutside int64   `json:"left_outside"` // events cut off by the robust extent
}

// Lattice is where the surface was computed, axis 0 east, axis 1 north.
type Lattice struct {
	Origin []float64 `json:"origin_m"`
	Step   []float64 `json:"step_m"`
	Nodes  []int     `json:"nodes"`
}

// Bandwidth is the bandwidth matrix H and the evidence for it.
type Bandwidth struct {
	Method             string    `json:"method"`
	Shape              string    `json:"shape"`
	Kernel             string    `json:"kernel"`
	Stages             int       `json:"stages,omitempty"`
	Matrix             []float64 `json:"matrix_m2"`     // row-major
	MatrixHex          []string  `json:"matrix_m2_hex"` // the same, exact: HexFloats(Matrix)
	Major              float64   `json:"major_m"`       // scale along the major axis
	Minor              float64   `json:"minor_m"`
	Bearing            float64   `json:"bearing_deg"` // of the major axis, clockwise from plane north
	Pilots             []Pilot   `json:"pilots,omitempty"`
	Criterion          *float64  `json:"criterion,omitempty"`
	AMISE              *AMISE    `json:"amise,omitempty"`
	Status             string    `json:"status"` // "converged", "fixed", ...
	Evaluations        int       `json:"evaluations"`
	Notes              []string  `json:"notes,omitempty"`
	StepsPerMinorScale float64   `json:"steps_per_minor_scale"`
	LatticeError       float64   `json:"lattice_error"` // estimated worst error as a share of the greatest density
}

// Pilot is one bandwidth used inside the selector.
type Pilot struct {
	Stage     int       `json:"stage"`
	Order     int       `json:"order"` // r of psi_r
	Matrix    []float64 `json:"matrix_m2"`
	MatrixHex []string  `json:"matrix_m2_hex"`
	Note      string    `json:"note,omitempty"`
}

// AMISE splits the estimated asymptotic mean integrated squared error.
type AMISE struct {
	SquaredBias float64 `json:"squared_bias"`
	Variance    float64 `json:"variance"`
}

// Regions says by what rule the region borders were drawn.
type Regions struct {
	Rule     string    `json:"rule"` // "events" or "mass"
	Text     string    `json:"text"` // the rule in a sentence: RegionRuleText(Rule)
	Contents []float64 `json:"contents"`
}

// StudyArea is where events could be observed, and what was done at its edge.
type StudyArea struct {
	File     string  `json:"file"` // name without folder
	Digest   Digest  `json:"digest"`
	Polygons int     `json:"polygons"` // on the plane, after those that meet were united
	Holes    int     `json:"holes"`
	Vertices int     `json:"vertices"`
	AreaKM2  float64 `json:"area_km2"` // on the plane
	Edge     string  `json:"edge"`     // "renormalise", "conserve", "none"
	Text     string  `json:"text"`     // the same in a sentence
	// MassInside is the estimate's integral over the area: 1 where mass is conserved.
	MassInside float64 `json:"mass_inside"`
	// LeastInside is the least kernel mass inside the area at a place with events;
	// 1 without correction.
	LeastInside float64 `json:"least_kernel_mass_at_events"`
}

// Zones is the file of named polygons that were reported on.
type Zones struct {
	File    string `json:"file"` // name without folder
	Digest  Digest `json:"digest"`
	Zones   int    `json:"zones"`
	Outside int    `json:"outside_study_area"` // left out: nothing of them lies in it
}

// Sensitivity is what the regions would be at another multiple of H.
type Sensitivity struct {
	Factor  float64             `json:"factor"` // of H
	Regions []SensitivityRegion `json:"regions"`
}

// SensitivityRegion is one region of a Sensitivity.
type SensitivityRegion struct {
	Content         float64 `json:"content"`
	ThresholdPerKM2 float64 `json:"threshold_per_km2"`
	AreaKM2         float64 `json:"area_km2"`
	Overlap         float64 `json:"overlap"` // area shared with the region at H over the area of both
}

// Guard counts what was kept back, without places.
type Guard struct {
	MinEvents       float64   `json:"min_events"`
	FloorPerKM2     float64   `json:"floor_per_km2"` // the surface says nothing below it
	RegionParts     int       `json:"region_parts_withheld"`
	RegionHoles     int       `json:"region_holes_withheld"`
	BandParts       int       `json:"band_parts_withheld"`
	BandHoles       int       `json:"band_holes_withheld"`
	Peaks           int       `json:"peaks_withheld"`
	RegionsWithheld []float64 `json:"regions_withheld"`      // contents withheld whole
	ClosePairs      []string  `json:"close_pairs,omitempty"` // a region and a contour that differ by few events
	Zones           int       `json:"zones_withheld,omitempty"`
	ZonesComplement int       `json:"zones_withheld_for_others,omitempty"` // so that those cannot be worked out
}

// File is one file of the bundle.
type File struct {
	Name   string `json:"name"` // slash-separated, relative to the bundle
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"` // 64 hexadecimal digits, lower case
}

// Times is what differs between two equal runs.
type Times struct {
	Started  time.Time `json:"started"`
	Finished time.Time `json:"finished"`
	Stages   []Stage   `json:"stages,omitempty"`
	Files    []File    `json:"files,omitempty"` // files that repeat inputs, workers or times
}

// Stage is the wall time of one stage.
type Stage struct {
	Name    string  `json:"name"`
	Seconds float64 `json:"wall_s"`
}
