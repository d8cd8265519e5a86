package record_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"drumlin/io/record"
)

func sample() *record.Record {
	h := []float64{12345.6789, -0.1, -0.1, 9876.54321}
	crit := 1.25e-9
	return &record.Record{
		Program: record.Program{Name: "drumlin", Version: "v0.1.0", Commit: "abc", Go: "go1.26", Dependencies: []record.Dependency{{Module: "example.org/a", Version: "v1.2.3"}}},
		Settings: record.Settings{{Name: "kernel", Value: "gaussian"}, {Name: "content", Value: []float64{.5, .75}},
			{Name: "bands", Value: 8}, {Name: "a-late-one", Value: true}},
		Rows:    record.Rows{Read: 100, Used: 90, SetAside: []record.SetAside{{Reason: "null <coordinate>", Rows: 7}}, OutsideExtent: 3},
		CRS:     record.CRS{Input: "EPSG:4326", Plane: record.Plane{Name: "LAEA", Method: "LAEA", Ellipsoid: "WGS 84", Lon0: 178, Lat0: -21, EqualArea: true}},
		Tally:   record.Tally{Grain: 1. / 1024, Step: 32, Events: 90, Weight: 90, EffectiveN: 90, Nodes: 77, LeftOutside: 3},
		Lattice: record.Lattice{Origin: []float64{0, 0}, Step: []float64{64, 64}, Nodes: []int{1024, 768}},
		Bandwidth: record.Bandwidth{Method: "plug-in", Shape: "full", Kernel: "gaussian", Stages: 2, Matrix: h, MatrixHex: record.HexFloats(h),
			Major: 111, Minor: 99, Bearing: 45, Pilots: []record.Pilot{{Stage: 1, Order: 6, Matrix: h, MatrixHex: record.HexFloats(h)}},
			Criterion: &crit, AMISE: &record.AMISE{SquaredBias: 1, Variance: 2}, Status: "converged", Evaluations: 12, StepsPerMinorScale: 5, LatticeError: 1e-5},
		Regions:  record.Regions{Rule: "events", Text: record.RegionRuleText("events"), Contents: []float64{.5, .75}},
		Guard:    record.Guard{MinEvents: 10, RegionParts: 2},
		Cautions: record.Cautions(),
		Files:    []record.File{{Name: "regions.geojson", Bytes: 5, SHA256: strings.Repeat("0a", 32)}},
		Inputs:   []record.Input{{Path: "events.parquet", Format: "parquet", Bytes: 1000, Rows: 100, Digest: record.Digest{Algorithm: "sha256", Scope: record.ScopeWhole, Value: "00"}}},
		Workers:  2,
		Times:    record.Times{Started: time.Date(2026, 1, 2, 3, 4, 5, 6000, time.UTC), Finished: time.Date(2026, 1, 2, 3, 4, 6, 0, time.UTC), Stages: []record.Stage{{Name: "tally", Seconds: .5}}},
	}
}

func encode(t *testing.T, r *record.Record) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := record.Write(&b, r); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestRoundTrip(t *testing.T) {
	first := encode(t, sample())
	r, err := record.Read(bytes.NewReader(first))
	if err != nil {
		t.Fatal(err)
	}
	if again := encode(t, r); !bytes.Equal(first, again) {
		t.Errorf("not the same after reading:\n%s\n%s", first, again)
	}
	if !bytes.HasSuffix(first, []byte("}\n")) || !bytes.Contains(first, []byte("null <coordinate>")) {
		t.Error("no newline at the end, or escapes made for a web page")
	}
	var at int // settings keep their order
	for _, name := range []string{`"kernel"`, `"content"`, `"bands"`, `"a-late-one"`} {
		i := bytes.Index(first, []byte(name+":"))
		if i < at {
			t.Errorf("%s out of order", name)
		}
		at = i
	}
	o, err := record.Sniff(bytes.NewReader(first))
	if err != nil || o.Version != record.Version || len(o.Files) != 1 {
		t.Error(o, err)
	}
}

// Only inputs, workers and times may differ between equal runs, and they come last.
func TestVaryingPartIsLast(t *testing.T) {
	a := sample()
	b := sample()
	b.Inputs = []record.Input{{Path: "b.csv", Format: "csv", Bytes: 3, Rows: 50}, {Path: "c.csv", Format: "csv", Bytes: 3, Rows: 50}}
	b.Workers = 9
	b.Times = record.Times{Started: a.Times.Started.Add(time.Hour), Finished: a.Times.Finished.Add(2 * time.Hour),
		Files: []record.File{{Name: "report.html", SHA256: strings.Repeat("1b", 32)}}}
	x, y := encode(t, a), encode(t, b)
	cut := bytes.Index(x, []byte("\n  \"inputs\":"))
	if cut < 0 || !bytes.HasPrefix(y, x[:cut]) {
		t.Error("the part before inputs differs")
	}
	for _, name := range []string{"inputs", "workers", "times"} {
		if bytes.Index(x, []byte("\n  \""+name+"\":")) < cut {
			t.Errorf("%s comes before inputs", name)
		}
	}
}

func TestValidateNamesAllFaults(t *testing.T) {
	r := sample()
	r.Program.Go = ""
	r.Rows.Used = 91
	r.Bandwidth.MatrixHex[1] = "0x1p-3"
	r.Bandwidth.Major = math.NaN()
	r.Bandwidth.Criterion = new(float64)
	*r.Bandwidth.Criterion = math.Inf(1)
	r.Settings = append(r.Settings, record.Setting{Name: "workers", Value: 2}, record.Setting{Name: "share", Value: []any{1., math.Inf(-1)}})
	r.Regions.Rule = "guess"
	r.Files[0].Name = "../x"
	r.Times.Finished = time.Time{}
	r.Workers = 0
	err := r.Validate()
	if err == nil {
		t.Fatal("no fault")
	}
	for _, want := range []string{"Go version", "do not add up: 100 read, but used, set aside and outside the extent make 101", "matrix_m2_hex[1]",
		"bandwidth.major_m is NaN", "bandwidth.criterion is +Inf", `"workers"`, "settings[5].share[1] is -Inf", "regions.rule", `"../x"`, "times need", "workers is 0"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("no %q in\n%v", want, err)
		}
	}
	if record.Write(new(bytes.Buffer), r) == nil {
		t.Error("a faulty record was written")
	}
}

func TestReadIsStrict(t *testing.T) {
	good := string(encode(t, sample()))
	for name, s := range map[string]string{
		"empty":         "",
		"not ours":      `{"record":"something else","record_version":1}`,
		"other version": strings.Replace(good, `"record_version": 1`, `"record_version": 2`, 1),
		"unknown":       strings.Replace(good, `"workers": 2`, `"workers": 2, "wokers": 3`, 1),
		"twice":         strings.Replace(good, `"bands": 8`, `"bands": 8, "bands": 9`, 1),
		"tail":          good + "{}",
		"cut":           good[:len(good)/2],
		"faulty":        strings.Replace(good, `"read": 100`, `"read": 101`, 1),
	} {
		if _, err := record.Read(strings.NewReader(s)); err == nil || strings.Contains(err.Error(), "\n") ||
			name != "twice" && !errors.Is(err, record.ErrMalformed) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestFileDigest(t *testing.T) {
	dir := t.TempDir()
	small := filepath.Join(dir, "small")
	os.WriteFile(small, []byte("abc"), 0o666)
	d, n, err := record.FileDigest(small)
	// FIPS 180-4 example: SHA-256 of "abc"
	if err != nil || n != 3 || d.Scope != record.ScopeWhole || d.Value != "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad" {
		t.Error(d, n, err)
	}
	if _, _, err := record.FileDigest(dir); err == nil {
		t.Error("a folder has a digest")
	}
	if _, _, err := record.FileDigest(filepath.Join(dir, "none")); !errors.Is(err, os.ErrNotExist) {
		t.Error(err)
	}
	// sampled: the stated scope, computed again the plain way on a sparse file
	const size, mib = 65<<20 + 12345, 1 << 20
	large := filepath.Join(dir, "large")
	f, _ := os.Create(large)
	for _, at := range []int64{0, 7 << 20, size - 3} {
		f.WriteAt([]byte(fmt.Sprint(at)[:1]), at)
	}
	f.Truncate(size)
	f.Close()
	data, _ := os.ReadFile(large)
	h := sha256.New()
	h.Write([]byte{size & 255, size >> 8 & 255, size >> 16 & 255, size >> 24, 0, 0, 0, 0})
	for i := range 64 {
		at := i * (size - mib) / 63
		h.Write(data[at : at+mib])
	}
	d, n, err = record.FileDigest(large)
	if err != nil || n != size || d.Scope != record.ScopeSampled || d.Value != hex.EncodeToString(h.Sum(nil)) {
		t.Error(d, n, err)
	}
	if d, _, _ = record.FileDigestUpTo(large, -1); d.Scope != record.ScopeWhole {
		t.Error(d)
	}
}

func BenchmarkSHA256(b *testing.B) {
	buf := make([]byte, 16<<20)
	b.SetBytes(int64(len(buf)))
	for b.Loop() {
		sha256.Sum256(buf)
	}
}

func BenchmarkFileDigest(b *testing.B) {
	name := filepath.Join(b.TempDir(), "f")
	os.WriteFile(name, make([]byte, 64<<20), 0o666)
	b.SetBytes(64 << 20)
	for b.Loop() {
		if _, _, err := record.FileDigest(name); err != nil {
			b.Fatal(err)
		}
	}
}

func ExampleHexFloats() {
	fmt.Println(record.HexFloats([]float64{1, 0.1, -1234.5}))
	// Output: [0x1p+00 0x1.999999999999ap-04 -0x1.34ap+10]
}
