package record

import (
	"errors"
	"fmt"
	"math"
	"path"
	"reflect"
	"strconv"
	"strings"
)

// varying are settings that must not enter the identical part of a record.
var varying = map[string]bool{"workers": true, "out": true, "replace": true, "quiet": true, "json": true}

// Validate returns all faults at once (errors.Join), nil when there are none.
// The files may still be missing: the bundle fills them in.
func (r *Record) Validate() error {
	var f faults
	if r.Kind != "" && r.Kind != Kind {
		f.add("record is %q, not %q", r.Kind, Kind)
	}
	if r.Version != 0 && r.Version != Version {
		f.add("record_version is %d, not %d", r.Version, Version)
	}
	if r.Program.Name == "" || r.Program.Version == "" || r.Program.Go == "" {
		f.add("program needs a name, a version and the Go version")
	}
	r.checkSettings(&f)
	r.checkRows(&f)
	if r.CRS.Input == "" {
		f.add("crs.input is empty")
	}
	if r.CRS.Plane.Method == "" {
		f.add("crs.plane.method is empty")
	}
	if n := len(r.Lattice.Nodes); n == 0 || len(r.Lattice.Origin) != n || len(r.Lattice.Step) != n {
		f.add("lattice has %d origins, %d steps and %d node counts", len(r.Lattice.Origin), len(r.Lattice.Step), n)
	}
	r.checkBandwidth(&f)
	if RegionRuleText(r.Regions.Rule) == "" {
		f.add("regions.rule is %q, not events or mass", r.Regions.Rule)
	}
	for _, c := range r.Regions.Contents {
		if !(c > 0 && c < 1) {
			f.add("regions.contents has %v, which is not between 0 and 1", c)
		}
	}
	if len(r.Cautions) == 0 {
		f.add("cautions are missing")
	}
	seen := map[string]bool{}
	checkFiles(&f, "files", r.Files, seen)
	checkFiles(&f, "times.files", r.Times.Files, seen)
	if r.Workers < 1 {
		f.add("workers is %d", r.Workers)
	}
	if r.Times.Started.IsZero() || r.Times.Finished.IsZero() {
		f.add("times need a start and a finish")
	} else if r.Times.Finished.Before(r.Times.Started) {
		f.add("times.finished lies before times.started")
	}
	checkFinite(&f, "", reflect.ValueOf(r).Elem())
	return errors.Join(f...)
}

type faults []error

func (f *faults) add(format string, a ...any) {
	*f = append(*f, fmt.Errorf("record: "+format, a...))
}

func (r *Record) checkSettings(f *faults) {
	seen := map[string]bool{}
	for _, s := range r.Settings {
		switch {
		case s.Name == "":
			f.add("settings has a setting without a name")
		case seen[s.Name]:
			f.add("settings has %q twice", s.Name)
		case varying[s.Name]:
			f.add("settings has %q, which does not change the result and would make equal runs differ", s.Name)
		}
		seen[s.Name] = true
	}
}

func (r *Record) checkRows(f *faults) {
	sum := r.Rows.Used + r.Rows.OutsideExtent
	bad := r.Rows.Read < 0 || r.Rows.Used < 0 || r.Rows.OutsideExtent < 0
	for _, s := range r.Rows.SetAside {
		sum += s.Rows
		bad = bad || s.Rows < 0
		if s.Reason == "" {
			f.add("rows.set_aside has %d rows without a reason", s.Rows)
		}
	}
	if bad {
		f.add("rows has a negative count")
	}
	if sum != r.Rows.Read {
		f.add("rows do not add up: %d read, but used, set aside and outside the extent make %d", r.Rows.Read, sum)
	}
	for i, in := range r.Inputs {
		if in.Path == "" || in.Format == "" {
			f.add("inputs[%d] needs a path and a format", i)
		}
	}
}

func (r *Record) checkBandwidth(f *faults) {
	b := &r.Bandwidth
	if b.Method == "" || b.Shape == "" || b.Kernel == "" || b.Status == "" {
		f.add("bandwidth needs a method, a shape, a kernel and a status")
	}
	checkHex(f, "bandwidth", b.Matrix, b.MatrixHex)
	for i, p := range b.Pilots {
		checkHex(f, fmt.Sprintf("bandwidth.pilots[%d]", i), p.Matrix, p.MatrixHex)
	}
}

func checkHex(f *faults, where string, v []float64, hex []string) {
	if d := int(math.Round(math.Sqrt(float64(len(v))))); len(v) == 0 || d*d != len(v) {
		f.add("%s.matrix_m2 has %d entries, not a square number of them", where, len(v))
	}
	if len(hex) != len(v) {
		f.add("%s.matrix_m2_hex has %d entries for %d in matrix_m2", where, len(hex), len(v))
		return
	}
	for i, h := range hex {
		x, err := strconv.ParseFloat(h, 64)
		if err != nil || !strings.Contains(h, "0x") || math.Float64bits(x) != math.Float64bits(v[i]) {
			f.add("%s.matrix_m2_hex[%d] is %q, which is not the exact form of %v", where, i, h, v[i])
		}
	}
}

func checkFiles(f *faults, where string, files []File, seen map[string]bool) {
	for i, x := range files {
		if x.Name == "" || path.IsAbs(x.Name) || path.Clean(x.Name) != x.Name || strings.HasPrefix(x.Name, "..") || strings.Contains(x.Name, `\`) {
			f.add("%s[%d] has the name %q, which is not a clean relative path", where, i, x.Name)
		}
		if seen[x.Name] {
			f.add("%s[%d]: %q comes twice", where, i, x.Name)
		}
		seen[x.Name] = true
		if x.Bytes < 0 || !isSHA256(x.SHA256) {
			f.add("%s[%d] (%s) needs a size and 64 hexadecimal digits", where, i, x.Name)
		}
	}
}

func isSHA256(s string) bool {
	return len(s) == 64 && strings.Trim(s, "0123456789abcdef") == ""
}

// checkFinite reports every float below v that JSON cannot hold.
func checkFinite(f *faults, where string, v reflect.Value) {
	switch v.Kind() {
	case reflect.Float64, reflect.Float32:
		if x := v.Float(); math.IsNaN(x) || math.IsInf(x, 0) {
			f.add("%s is %v", strings.TrimPrefix(where, "."), x)
		}
	case reflect.Pointer, reflect.Interface:
		if !v.IsNil() {
			checkFinite(f, where, v.Elem())
		}
	case reflect.Slice:
		for i := range v.Len() {
			checkFinite(f, fmt.Sprintf("%s[%d]", where, i), v.Index(i))
		}
	case reflect.Struct:
		if v.Type().PkgPath() == "time" {
			return
		}
		if s, ok := v.Interface().(Setting); ok {
			checkFinite(f, where+"."+s.Name, v.FieldByName("Value"))
			return
		}
		for i := range v.NumField() {
			name, _, _ := strings.Cut(v.Type().Field(i).Tag.Get("json"), ",")
			checkFinite(f, where+"."+name, v.Field(i))
		}
	}
}
