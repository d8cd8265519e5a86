package config

import (
	"fmt"
	"slices"
	"strings"

	"github.com/spf13/pflag"
)

// BandwidthNames are the selectors, the default first.
var BandwidthNames = []string{"plug-in", "auto", "scv", "lscv", "bcv", "likelihood-cv", "normal-reference"}

// BandwidthSettings are what a run of bandwidth was asked to do.
type BandwidthSettings struct {
	Settings  `mapstructure:",squash"`
	Stability int `mapstructure:"stability"`
	Seed      int `mapstructure:"seed"`
}

// BandwidthFlags declares the flags of the command bandwidth.
func BandwidthFlags(f *pflag.FlagSet) {
	InputFlags(f)
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
	var faults []string
	if err := s.ValidateInput(); err != nil {
		faults = append(faults, strings.TrimPrefix(err.Error(), ErrSettings.Error()+": "))
	}
	oneOf := func(name, v string, allowed []string) {
		if !slices.Contains(allowed, v) {
			faults = append(faults, fmt.Sprintf("%s is %q; choose %s", name, v, strings.Join(allowed, ", ")))
		}
	}
	oneOf("bandwidth", s.Bandwidth, append([]string{"all"}, BandwidthNames...))
	oneOf("shape", s.Shape, []string{"full", "diagonal", "scalar"})
	if s.Stability != 0 && (s.Stability < 20 || s.Stability > 10000) {
		faults = append(faults, fmt.Sprintf("stability is %d; give 20 to 10000 replicates, or 0 for none", s.Stability))
	}
	if len(faults) == 0 {
		return nil
	}
	return fmt.Errorf("%w: %s", ErrSettings, strings.Join(faults, "; "))
}

// Selectors returns the selectors that are to run.
func (s *BandwidthSettings) Selectors() []string {
	if s.Bandwidth == "all" {
		return slices.Clone(BandwidthNames)
	}
	return []string{s.Bandwidth}
}
