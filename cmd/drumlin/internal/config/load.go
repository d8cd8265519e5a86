// Package config puts the settings of a run together: flag over environment
// over file over default. It is the one importer of viper.
package config

import (
	"errors"
	"fmt"
	"io/fs"
	"reflect"
	"sort"
	"strings"

	"github.com/go-viper/mapstructure/v2"
	"github.com/spf13/pflag"
	"github.com/spf13/viper"
)

// EnvPrefix stands before the upper-case name of a setting in the environment.
const EnvPrefix = "DRUMLIN"

// MapFlags declares the flags of map with their defaults.
func MapFlags(f *pflag.FlagSet) {
	f.String("x", "", "column of the longitude or easting; default: an unambiguous name such as lon or x")
	f.String("y", "", "column of the latitude or northing")
	f.String("crs", "", "CRS of the coordinates: EPSG:n, or plane for metres without a place; default: degrees if the names say so")
	f.String("work-crs", "auto", "plane of the estimate: auto (equal-area, centred on the events) or EPSG:n")
	f.String("weight", "", "column of weights, above 0")
	f.String("bandwidth", BandwidthNames[0], "how the bandwidth matrix is chosen: "+strings.Join(BandwidthNames, ", "))
	f.String("shape", "full", "form of the bandwidth matrix: full, diagonal, scalar")
	f.String("matrix", "", "a fixed bandwidth matrix h11,h12,h22 in square metres")
	f.Float64("scale", 0, "a fixed bandwidth of scale h in metres, the same in all directions")
	f.String("study-area", "", "GeoJSON polygons where events could be seen; the map ends there, and the estimate is corrected at the edge")
	f.String("edge", "renormalise", "edge correction: renormalise (flat where events are evenly spread), conserve (keeps the total) or none")
	f.String("zones", "", "GeoJSON polygons with names, such as districts: expected and recorded events of each, as zones.geojson")
	f.String("content", "50,75,95", "contents of the highest density regions, per cent")
	f.String("bands", "8", "how many isobands, or their levels in events per km2")
	f.String("band-content", "", "isobands by content instead: per cents such as 25,50,75,90, whose regions' borders are their edges")
	f.String("lattice", "auto", "nodes along the longer axis: auto (1024, up to 4096 until the minor scale spans 4 steps) or about a number (steps are powers of two)")
	f.String("region-rule", "events", "what a region's content counts: events (events not yet seen) or mass (of the estimate)")
	f.Float64("min-events", 10, "least events that a released part, hole or peak rests on")
	f.String("context", "", "GeoJSON lines or polygons drawn beneath the map in the report (coast, districts); never used in the estimate")
	f.Bool("sensitivity", true, "regions at H/2 and 2H in the report and the record")
	f.String("png", "", "file for the map as a picture; must not exist, unless --replace")
	f.Int("workers", 0, "goroutines that work; 0: all CPUs")
	f.String("out", "", "folder to write; must not exist, or hold an earlier bundle with --replace")
	f.Bool("replace", false, "replace an earlier bundle")
	f.String("formats", "geojson,geotiff", "what to write: geojson, geojson-seq, geoparquet, flatgeobuf; for the surface geotiff, parquet")
	f.Bool("json", false, "messages as JSON lines")
	f.Bool("quiet", false, "no progress")
}

// Load reads the settings from flags, environment and the file (none if "").
// An unknown key in the file is an error, as is a value of the wrong kind.
func Load(flags *pflag.FlagSet, file string, inputs []string) (*Settings, error) {
	var s Settings
	if err := loadInto(&s, flags, file, inputs); err != nil {
		return nil, err
	}
	return &s, nil
}

// loadInto reads the settings of any command into a struct with the names of
// its flags.
func loadInto(into any, flags *pflag.FlagSet, file string, inputs []string) error {
	v := viper.New()
	v.SetEnvPrefix(EnvPrefix)
	v.SetEnvKeyReplacer(strings.NewReplacer("-", "_"))
	v.AutomaticEnv()
	known := map[string]bool{"inputs": true}
	var bindErr error
	flags.VisitAll(func(f *pflag.Flag) {
		if f.Name == "config" || f.Name == "help" {
			return
		}
		known[f.Name] = true
		bindErr = errors.Join(bindErr, v.BindPFlag(f.Name, f))
	})
	if bindErr != nil {
		return bindErr
	}
	if file != "" {
		v.SetConfigFile(file)
		if err := v.ReadInConfig(); err != nil {
			if errors.Is(err, fs.ErrNotExist) {
				return fmt.Errorf("%w: settings file %s does not exist", ErrSettings, file)
			}
			return fmt.Errorf("%w: settings file %s: %s", ErrSettings, file, strings.Join(strings.Fields(err.Error()), " "))
		}
		var unknown []string
		for _, k := range v.AllKeys() {
			if top, _, _ := strings.Cut(k, "."); !known[top] {
				unknown = append(unknown, k)
			}
		}
		if sort.Strings(unknown); len(unknown) > 0 {
			return fmt.Errorf("%w: settings file %s: unknown key %s; the keys are the names of the flags", ErrSettings, file, strings.Join(unknown, ", "))
		}
	}
	if len(inputs) > 0 {
		v.Set("inputs", inputs)
	}
	err := v.UnmarshalExact(into, viper.DecodeHook(mapstructure.ComposeDecodeHookFunc(splitList)))
	if err != nil {
		return fmt.Errorf("%w: %s", ErrSettings, strings.Join(strings.Fields(err.Error()), " "))
	}
	return nil
}

// splitList turns "50,75,95", or a single number, into a list where a list is wanted.
func splitList(from, to reflect.Type, data any) (any, error) {
	if to.Kind() != reflect.Slice || from.Kind() == reflect.Slice {
		return data, nil
	}
	text, ok := data.(string)
	if !ok {
		return []any{data}, nil
	}
	if strings.TrimSpace(text) == "" {
		return []string{}, nil
	}
	parts := strings.Split(text, ",")
	for i := range parts {
		parts[i] = strings.TrimSpace(parts[i])
	}
	return parts, nil
}
