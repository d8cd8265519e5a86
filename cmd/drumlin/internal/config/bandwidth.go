package config

import (
	"fmt"
	"slices"
	"strings"

	"github.com/spf13/pflag"
)

// BandwidthNames are the selectors, the default first.
var BandwidthNames = []string{"auto", "plug-in", "scv", "lscv", "bcv", "likelihood-cv", "normal-reference"}

// BandwidthSettings are what a run of bandwidth was asked to do.
type BandwidthSettings struct {
	Settings  `mapstructure:",squash"`
	Stability int `mapstructure:"stability"`
	Seed      int `mapstructure:"seed"`
}

// BandwidthFlags declares the flags of the command bandwidth.
func BandwidthFlags(f *pflag.FlagSet) {
	f.String("x", "", "column of the longitude or easting; default: an unambiguous name such as lon or x")
	f.String("y", "", "column of the latitude or northing")
	f.String("crs", "", "CRS of the coordinates: EPSG:n, or plane for metres without a place; default: degrees if the names say so")
	f.String("work-crs", "auto", "plane of the estimate: auto (equal-area, centred on the events) or EPSG:n")
	f.String("weight", "", "column of weights, above 0")
	f.String("bandwidth", "all", "which selectors to run: all, or one of "+strings.Join(BandwidthNames, ", "))
	f.String("shape", "full", "form of the bandwidth matrix: full, diagonal, scalar")
	f.Int("stability", 0, "bootstrap replicates behind intervals for the default's ellipse; 0: none")
	f.Int("seed", 1, "of the bootstrap")
	f.Int("workers", 0, "goroutines that work; 0: all CPUs")
	f.Bool("json", false, "the table as JSON, messages as JSON lines")
	f.Bool("quiet", false, "no progress")
}

// LoadBandwidth reads the settings of bandwidth, as Load does those of map.
func LoadBandwidth(flags *pflag.FlagSet, file string, inputs []string) (*BandwidthSettings, error) {
	var s BandwidthSettings
	if err := loadInto(&s, flags, file, inputs); err != nil {
		return nil, err
	}
	return &s, nil
}

// Validate lists all faults at once.
func (s *BandwidthSettings) Validate() error {
	c := s.Settings // what the command has no flag for takes any good value
	c.Out, c.Content, c.Bands, c.RegionRule, c.Lattice, c.Formats = ".", []float64{50}, []float64{8}, "events", "auto", []string{"geojson"}
	if c.Bandwidth == "all" {
		c.Bandwidth = BandwidthNames[0]
	}
	err := c.Validate()
	if s.Stability != 0 && (s.Stability < 20 || s.Stability > 10000) {
		more := fmt.Errorf("%w: stability is %d; give 20 to 10000 replicates, or 0 for none", ErrSettings, s.Stability)
		if err == nil {
			return more
		}
		return fmt.Errorf("%w; %s", err, strings.TrimPrefix(more.Error(), ErrSettings.Error()+": "))
	}
	return err
}

// Selectors returns the selectors that are to run.
func (s *BandwidthSettings) Selectors() []string {
	if s.Bandwidth == "all" {
		return slices.Clone(BandwidthNames)
	}
	return []string{s.Bandwidth}
}
