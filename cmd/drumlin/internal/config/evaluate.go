package config

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/pflag"
)

// EvaluateSettings are what a run of evaluate was asked to do. The names are
// those of the flags.
type EvaluateSettings struct {
	Inputs []string `mapstructure:"inputs"` // files, folders, quoted globs

	Columns  []string `mapstructure:"columns"` // coordinates, of the events and of the query
	At       string   `mapstructure:"at"`      // query file
	Out      string   `mapstructure:"out"`
	Replace  bool     `mapstructure:"replace"`
	Weight   string   `mapstructure:"weight"`
	Gradient bool     `mapstructure:"gradient"`

	Bandwidth string    `mapstructure:"bandwidth"`
	Shape     string    `mapstructure:"shape"`
	Matrix    []float64 `mapstructure:"matrix"` // upper triangle row by row, squared data units
	Scale     float64   `mapstructure:"scale"`
	Kernel    string    `mapstructure:"kernel"`

	Rtol    float64 `mapstructure:"rtol"`
	Atol    float64 `mapstructure:"atol"`
	Plan    string  `mapstructure:"plan"`
	Workers int     `mapstructure:"workers"`
	JSON    bool    `mapstructure:"json"`
	Quiet   bool    `mapstructure:"quiet"`
}

// Names that settings of evaluate may take.
var (
	EvaluateBandwidths = []string{"plug-in", "scv", "lscv", "bcv", "likelihood-cv", "normal-reference"}
	kernelNames        = []string{"gaussian", "epanechnikov", "biweight", "triweight", "uniform"}
	planNames          = []string{"auto", "direct", "tree", "lattice"}
)

// EvaluateFlags declares the flags of evaluate with their defaults.
func EvaluateFlags(f *pflag.FlagSet) {
	f.String("columns", "", "columns of the coordinates, any number of them: a,b,c")
	f.String("at", "", "file of query rows with the same columns (Parquet, Arrow or CSV)")
	f.String("out", "", "file to write: NAME.parquet, NAME.arrow or NAME.csv")
	f.Bool("replace", false, "replace the file that out names")
	f.String("weight", "", "column of weights, above 0")
	f.Bool("gradient", false, "write the gradient too, one column gradient_<column> for each coordinate")
	f.String("bandwidth", "plug-in", "how the bandwidth matrix is chosen: "+strings.Join(EvaluateBandwidths, ", "))
	f.String("shape", "full", "form of the bandwidth matrix: full, diagonal, scalar")
	f.String("matrix", "", "a fixed bandwidth matrix of the kernel: h11,h12,...,h1d,h22,...,hdd in squared units of the columns")
	f.Float64("scale", 0, "a fixed bandwidth of scale h, the same for all columns, in their unit")
	f.String("kernel", "gaussian", "kernel: "+strings.Join(kernelNames, ", "))
	f.Float64("rtol", 1e-6, "most error of a density, as a part of it")
	f.Float64("atol", 0, "most error of a density on top of rtol, in units of density; above 0 it makes far tails cheap")
	f.String("plan", "auto", "how to evaluate: auto (the cheapest), direct, tree, lattice")
	f.Int("workers", 0, "goroutines that work; 0: all CPUs")
	f.Bool("json", false, "messages as JSON lines")
	f.Bool("quiet", false, "no words, no progress")
}

// LoadEvaluate reads the settings of evaluate, as Load does those of map.
func LoadEvaluate(flags *pflag.FlagSet, file string, inputs []string) (*EvaluateSettings, error) {
	var s EvaluateSettings
	if err := loadInto(&s, flags, file, inputs); err != nil {
		return nil, err
	}
	return &s, nil
}

// Fixed reports whether the bandwidth matrix is given.
func (s *EvaluateSettings) Fixed() bool { return len(s.Matrix) > 0 || s.Scale != 0 }

// OutFormat returns "parquet", "arrow" or "csv" by the name to write, "" for
// another ending.
func (s *EvaluateSettings) OutFormat() string {
	switch strings.ToLower(filepath.Ext(s.Out)) {
	case ".parquet":
		return "parquet"
	case ".arrow", ".feather", ".ipc":
		return "arrow"
	case ".csv":
		return "csv"
	}
	return ""
}

// Validate lists all faults at once.
func (s *EvaluateSettings) Validate() error {
	var f []string
	bad := func(format string, a ...any) { f = append(f, fmt.Sprintf(format, a...)) }
	oneOf := func(name, v string, allowed []string) {
		if !slices.Contains(allowed, v) {
			bad("%s is %q; choose %s", name, v, strings.Join(allowed, ", "))
		}
	}
	if len(s.Inputs) == 0 {
		bad("no input; name one or more files")
	}
	d := len(s.Columns)
	if d == 0 {
		bad("columns is missing; name the coordinates, for example --columns x,y")
	}
	for i, c := range s.Columns {
		if c == "" || slices.Contains(s.Columns[:i], c) {
			bad("columns %v: names must differ and not be empty", s.Columns)
			break
		}
	}
	if s.Weight != "" && slices.Contains(s.Columns, s.Weight) {
		bad("weight %q is also a coordinate", s.Weight)
	}
	if s.At == "" {
		bad("at is missing; name the file of query rows")
	}
	switch {
	case s.Out == "":
		bad("out is missing; name the file to write, for example --out density.parquet")
	case s.OutFormat() == "":
		bad("out is %q; the name must end in .parquet, .arrow or .csv", s.Out)
	}
	oneOf("bandwidth", s.Bandwidth, EvaluateBandwidths)
	oneOf("shape", s.Shape, []string{"full", "diagonal", "scalar"})
	oneOf("kernel", s.Kernel, kernelNames)
	oneOf("plan", s.Plan, planNames)
	if n := len(s.Matrix); n != 0 && n != d*(d+1)/2 {
		bad("matrix has %d numbers; %d columns need %d: h11,h12,... the upper triangle row by row", n, d, d*(d+1)/2)
	}
	for _, v := range s.Matrix {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			bad("matrix %v is not finite", s.Matrix)
			break
		}
	}
	if s.Scale < 0 || math.IsNaN(s.Scale) || math.IsInf(s.Scale, 0) {
		bad("scale is %g; give a positive number", s.Scale)
	}
	if len(s.Matrix) > 0 && s.Scale != 0 {
		bad("matrix and scale are both given; give one")
	}
	if !(s.Rtol >= 0 && s.Rtol <= 0.1) || !(s.Atol >= 0) || math.IsInf(s.Atol, 0) || s.Rtol == 0 && s.Atol == 0 {
		bad("rtol %g and atol %g: rtol from 0 to 0.1, atol at least 0, one of them above 0", s.Rtol, s.Atol)
	}
	if s.Workers < 0 || s.Workers > 1024 {
		bad("workers is %d; give 0 (all CPUs) to 1024", s.Workers)
	}
	if len(f) == 0 {
		return nil
	}
	return fmt.Errorf("%w: %s", ErrSettings, strings.Join(f, "; "))
}
