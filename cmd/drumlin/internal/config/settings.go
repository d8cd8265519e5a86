package config

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// Settings are what a run of map was asked to do, after flags, environment,
// file and defaults have been put together. The names are those of the flags.
type Settings struct {
	Inputs []string `mapstructure:"inputs"` // files, folders, quoted globs

	X       string `mapstructure:"x"`
	Y       string `mapstructure:"y"`
	CRS     string `mapstructure:"crs"`
	WorkCRS string `mapstructure:"work-crs"`
	Weight  string `mapstructure:"weight"`

	Bandwidth string    `mapstructure:"bandwidth"`
	Shape     string    `mapstructure:"shape"`
	Matrix    []float64 `mapstructure:"matrix"` // h11, h12, h22 in square metres
	Scale     float64   `mapstructure:"scale"`  // h in metres

	StudyArea string `mapstructure:"study-area"` // GeoJSON file, none if ""
	Edge      string `mapstructure:"edge"`       // renormalise, conserve, none
	Zones     string `mapstructure:"zones"`      // GeoJSON file, none if ""

	Content []float64 `mapstructure:"content"` // per cent
	Bands   []float64 `mapstructure:"bands"`   // one whole number: how many; else levels, events per km2
	// BandContent, when given, takes the place of Bands: the isobands' lower edges
	// are the borders of the regions with these contents, per cent.
	BandContent []float64 `mapstructure:"band-content"`

	Lattice    string  `mapstructure:"lattice"` // auto or a number of nodes
	RegionRule string  `mapstructure:"region-rule"`
	MinEvents  float64 `mapstructure:"min-events"`

	Context     string `mapstructure:"context"`     // lines drawn beneath the map, none if ""
	Sensitivity bool   `mapstructure:"sensitivity"` // regions at H/2 and 2H too

	PNG     string   `mapstructure:"png"` // picture to write, none if ""
	Workers int      `mapstructure:"workers"`
	Out     string   `mapstructure:"out"`
	Replace bool     `mapstructure:"replace"`
	Formats []string `mapstructure:"formats"`
	JSON    bool     `mapstructure:"json"`
	Quiet   bool     `mapstructure:"quiet"`
}

// ErrSettings marks settings that cannot be used.
var ErrSettings = errors.New("bad settings")

// Nodes returns the lattice's nodes asked for, 0 for auto.
func (s *Settings) Nodes() int {
	n, _ := strconv.Atoi(s.Lattice)
	return n
}

// BandCount returns how many isobands are wanted, 0 when levels are given.
func (s *Settings) BandCount() int {
	if len(s.Bands) == 1 && s.Bands[0] == math.Trunc(s.Bands[0]) && s.Bands[0] >= 1 && s.Bands[0] <= math.MaxInt32 {
		return int(s.Bands[0])
	}
	return 0
}

// Fixed reports whether the bandwidth matrix is given.
func (s *Settings) Fixed() bool { return len(s.Matrix) > 0 || s.Scale != 0 }

// Validate lists all faults at once.
func (s *Settings) Validate() error {
	var f []error
	bad := func(format string, a ...any) { f = append(f, fmt.Errorf(format, a...)) }
	oneOf := func(name, v string, allowed ...string) {
		for _, a := range allowed {
			if v == a {
				return
			}
		}
		bad("%s is %q; choose %s", name, v, strings.Join(allowed, ", "))
	}
	if len(s.Inputs) == 0 {
		bad("no input; name one or more files")
	}
	if s.Out == "" {
		bad("out is missing; name the folder to write, for example --out map")
	}
	if (s.X == "") != (s.Y == "") {
		bad("only one of x and y is given; name both columns")
	}
	oneOf("bandwidth", s.Bandwidth, BandwidthNames...)
	oneOf("shape", s.Shape, "full", "diagonal", "scalar")
	oneOf("region-rule", s.RegionRule, "events", "mass")
	oneOf("edge", s.Edge, "renormalise", "conserve", "none")
	for _, v := range s.Formats {
		oneOf("formats", v, "geojson", "geojson-seq", "geoparquet", "flatgeobuf", "geotiff", "parquet")
	}
	if len(s.Formats) == 0 {
		bad("formats is empty; choose some of geojson, geojson-seq, geoparquet, flatgeobuf, geotiff, parquet")
	}
	if n := len(s.Matrix); n != 0 && n != 3 {
		bad("matrix has %d numbers; give h11,h12,h22 in square metres", n)
	}
	if slices.ContainsFunc(s.Matrix, func(v float64) bool { return math.IsInf(v, 0) }) {
		bad("matrix %v is not finite; give h11,h12,h22 in square metres", s.Matrix)
	} else if len(s.Matrix) == 3 && !(s.Matrix[0] > 0 && s.Matrix[2] > 0 && s.Matrix[0]*s.Matrix[2] > s.Matrix[1]*s.Matrix[1]) {
		bad("matrix %v is not positive definite; needs h11 > 0, h22 > 0 and h11*h22 > h12*h12", s.Matrix)
	}
	if s.Scale < 0 || math.IsNaN(s.Scale) || math.IsInf(s.Scale, 0) {
		bad("scale is %g; give a positive length in metres", s.Scale)
	}
	if len(s.Matrix) > 0 && s.Scale != 0 {
		bad("matrix and scale are both given; give one")
	}
	if len(s.Content) == 0 {
		bad("content is empty; give per cents such as 50,75,95")
	}
	seen := map[float64]bool{}
	for _, c := range s.Content {
		if !(c >= 1 && c <= 99.9) {
			bad("content %g is not between 1 and 99.9 per cent", c)
		}
		if seen[c] {
			bad("content %g stands twice", c)
		}
		seen[c] = true
	}
	for i, c := range s.BandContent {
		if !(c >= 1 && c <= 99.9) || slices.Contains(s.BandContent[:i], c) {
			bad("band-content %v: give different per cents between 1 and 99.9", s.BandContent)
			break
		}
	}
	if n := s.BandCount(); n > 100 {
		bad("bands is %d; at most 100", n)
	} else if n == 0 {
		for i, v := range s.Bands {
			if !(v > 0) || math.IsInf(v, 0) || i > 0 && v <= s.Bands[i-1] {
				bad("bands %v: levels must be positive and rising, in events per km2", s.Bands)
				break
			}
		}
		if len(s.Bands) == 0 || len(s.Bands) > 100 {
			bad("bands has %d levels; give a number of bands or 1 to 100 levels", len(s.Bands))
		}
	}
	if s.Lattice != "auto" {
		if n, err := strconv.Atoi(s.Lattice); err != nil || n < 32 || n > 8192 {
			bad("lattice is %q; give auto or 32 to 8192 nodes", s.Lattice)
		}
	}
	if !(s.MinEvents >= 0 && s.MinEvents <= 1e9) {
		bad("min-events is %g; give a number of events from 0 on", s.MinEvents)
	}
	if s.Workers < 0 || s.Workers > 1024 {
		bad("workers is %d; give 0 (all CPUs) to 1024", s.Workers)
	}
	if len(f) == 0 {
		return nil
	}
	text := make([]string, len(f))
	for i, e := range f {
		text[i] = e.Error()
	}
	return fmt.Errorf("%w: %s", ErrSettings, strings.Join(text, "; "))
}
