package report_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/base64"
	"encoding/json"
	"encoding/xml"
	"errors"
	"fmt"
	"html"
	"io"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"drumlin/io/geojson"
	"drumlin/io/record"
	"drumlin/io/report"
	"drumlin/spatial"
)

var dataElement = regexp.MustCompile(`<data value="([^"]*)" data-of="([^"]*)">([^<]*)</data>`)

// Every number on the page that names a file's member equals that member.
func TestNumbersEqualFiles(t *testing.T) {
	p := page(t)
	members := map[string]any{}
	for _, write := range []func(*bytes.Buffer) error{
		func(b *bytes.Buffer) error { return geojson.WriteRegions(b, p.Release, geojson.Meta{}) },
		func(b *bytes.Buffer) error { return geojson.WriteContours(b, p.Release, geojson.Meta{}) },
		func(b *bytes.Buffer) error { return geojson.WritePeaks(b, p.Release, geojson.Meta{}) },
	} {
		var b bytes.Buffer
		if err := write(&b); err != nil {
			t.Fatal(err)
		}
		var c struct {
			Features []struct {
				ID         string
				Properties map[string]any
			}
		}
		if err := json.Unmarshal(b.Bytes(), &c); err != nil {
			t.Fatal(err)
		}
		for _, f := range c.Features {
			for name, v := range f.Properties {
				members[f.ID+"/"+name] = v
			}
		}
	}
	var rec any
	b, err := json.Marshal(p.Record)
	if err == nil {
		err = json.Unmarshal(b, &rec)
	}
	if err != nil {
		t.Fatal(err)
	}
	flatten("run", rec, members)
	found := dataElement.FindAllStringSubmatch(string(write(t, p)), -1)
	if len(found) < 80 {
		t.Fatalf("only %d numbers", len(found))
	}
	seen := map[string]bool{}
	for _, m := range found {
		of := html.UnescapeString(m[2])
		want, ok := members[of].(float64)
		if !ok {
			t.Errorf("%s is in no file (shown %q)", of, m[3])
			continue
		}
		got, err := strconv.ParseFloat(m[1], 64)
		if err != nil || got != want {
			t.Errorf("%s: page %s, file %v", of, m[1], want)
		}
		seen[of] = true
	}
	for _, must := range []string{"region-50/area_km2", "region-95/events", "peak-1/standard_error_per_km2", "peak-1/debiased_per_km2", "band-8/from_per_km2", "run/bandwidth/matrix_m2/3", "run/rows/set_aside/0/rows", "run/bandwidth/amise/variance"} {
		if !seen[must] {
			t.Errorf("%s is not on the page", must)
		}
	}
}

func flatten(prefix string, v any, out map[string]any) {
	switch v := v.(type) {
	case map[string]any:
		for k, w := range v {
			flatten(prefix+"/"+k, w, out)
		}
	case []any:
		for i, w := range v {
			flatten(fmt.Sprintf("%s/%d", prefix, i), w, out)
		}
	default:
		out[prefix] = v
	}
}

// The policy allows the page's own style and script and nothing else.
func TestPolicyHoldsTheHashes(t *testing.T) {
	s := string(write(t, page(t)))
	policy := regexp.MustCompile(`Content-Security-Policy" content="([^"]*)"`).FindStringSubmatch(s)
	if policy == nil {
		t.Fatal("no policy")
	}
	csp := html.UnescapeString(policy[1])
	for _, tag := range []string{"style", "script"} {
		_, rest, _ := strings.Cut(s, "<"+tag+">")
		body, _, ok := strings.Cut(rest, "</"+tag+">")
		if !ok || strings.Count(s, "<"+tag) != 1 {
			t.Fatalf("not exactly one %s", tag)
		}
		h := sha256.Sum256([]byte(body))
		if want := tag + "-src 'sha256-" + base64.StdEncoding.EncodeToString(h[:]) + "'"; !strings.Contains(csp, want) {
			t.Errorf("policy %q lacks %s", csp, want)
		}
	}
	if !strings.HasPrefix(csp, "default-src 'none'") || strings.Contains(csp, "unsafe") {
		t.Errorf("policy %q", csp)
	}
	if m := regexp.MustCompile(`(?i)\s(style|on[a-z]+)="|https?://`).FindString(s); m != "" {
		t.Errorf("the page holds %q", m)
	}
}

// Equal runs give equal bytes but for the section that repeats inputs, workers
// and times.
func TestSameBytes(t *testing.T) {
	a := write(t, page(t))
	if !bytes.Equal(a, write(t, page(t))) {
		t.Fatal("two writes differ")
	}
	p := page(t)
	r := *p.Record
	p.Record = &r
	r.Inputs = []record.Input{{Path: "elsewhere/part-1.parquet", Format: "parquet", Bytes: 7, Rows: 12}, {Path: "part-2.csv", Format: "csv", Bytes: -1, Rows: 20000}}
	r.Workers = 31
	r.Times = record.Times{Started: time.Date(2030, 1, 1, 0, 0, 0, 0, time.UTC)}
	cut := func(b []byte) string {
		before, rest, ok := bytes.Cut(b, []byte(`<dl class="run">`))
		_, after, ok2 := bytes.Cut(rest, []byte("</dl>"))
		if !ok || !ok2 {
			t.Fatal("no section of this run")
		}
		return string(before) + string(after)
	}
	b := write(t, p)
	if bytes.Equal(a, b) || cut(a) != cut(b) {
		t.Fatal("inputs, workers and times must change the last section and nothing else")
	}
}

// Text from outside stays text, in one direction.
func TestHostileText(t *testing.T) {
	evil := "</script><img src=x onerror=alert(1)>\"'`&=cmd|' /C calc'!A0 \u202egpj.exe\u2066 {{.}} \x00 ]]>"
	p := page(t)
	r := *p.Record
	p.Record, p.Title, p.Unit = &r, evil, evil
	p.Period = &report.Period{From: evil, Until: evil, Zone: evil}
	r.Settings = record.Settings{{Name: evil, Value: evil}, {Name: "x", Value: []string{evil}}}
	r.Warnings, r.Cautions = []string{evil}, []string{evil}
	r.Rows.SetAside = []record.SetAside{{Reason: evil, Rows: 9}}
	r.Inputs = []record.Input{{Path: "a/" + evil, Format: evil, Digest: record.Digest{Algorithm: evil, Scope: evil, Value: evil}}}
	r.Files = []record.File{{Name: "javascript:alert(1)//" + evil, SHA256: evil}}
	r.CRS.Input, r.CRS.Plane.Name, r.Regions.Text = evil, evil, evil
	r.Bandwidth.Method, r.Bandwidth.Shape, r.Bandwidth.Kernel, r.Bandwidth.Status, r.Bandwidth.Notes, r.Bandwidth.MatrixHex = evil, evil, evil, evil, []string{evil}, []string{evil}
	r.Program = record.Program{Name: evil, Version: evil, Commit: evil, Go: evil, Dependencies: []record.Dependency{{Module: evil, Version: evil}}}
	p.Alternatives[0].Note = evil
	p.Choices = append(p.Choices, report.Choice{Method: evil, Shape: evil, Status: evil, Notes: []string{evil}})
	p.Profile = &report.Profile{Name: evil, Factors: []float64{1, 2}, Values: []float64{1, 2}}
	p.Stability[0].What, p.Stability[0].How = evil, evil
	s := string(write(t, p))
	if n := strings.Count(s, "<img"); n != 0 {
		t.Errorf("%d images", n)
	}
	if strings.Count(s, "</script") != 1 || strings.Contains(s, `href="javascript:`) {
		t.Error("the script's end or a script address got through")
	}
	if i := strings.IndexAny(s, "\u202e\u2066\x00"); i >= 0 {
		t.Errorf("a control character got through: %q", s[max(0, i-300):i+40])
	}
	if !strings.Contains(s, "⟨U+202E⟩") {
		t.Error("the control character is not shown")
	}
	checkTree(t, s)
	var png bytes.Buffer
	if err := report.WritePNG(&png, p, report.PNGOptions{Width: 800}); err != nil {
		t.Error(err)
	}
}

// checkTree reads the page with a strict reader: every element closes, ids are
// single, every label and every reference inside the page has its target.
func checkTree(t *testing.T, s string) {
	t.Helper()
	s = regexp.MustCompile(`(?s)<(script|style)>.*?</(script|style)>`).ReplaceAllString(s, "")
	s = regexp.MustCompile(`\s(checked|download)([\s>])`).ReplaceAllString(s, ` $1=""$2`)
	s = regexp.MustCompile(`<(meta|link|input)([^>]*)>`).ReplaceAllString(s, "<$1$2/>")
	d := xml.NewDecoder(strings.NewReader(s))
	d.Entity = xml.HTMLEntity
	ids := map[string]bool{}
	var refs []string
	for {
		tok, err := d.Token()
		if tok == nil {
			if !errors.Is(err, io.EOF) {
				t.Errorf("the page does not nest: %v", err)
			}
			break
		}
		e, ok := tok.(xml.StartElement)
		if !ok {
			continue
		}
		for _, a := range e.Attr {
			switch {
			case a.Name.Local == "id":
				if ids[a.Value] {
					t.Errorf("id %s comes twice", a.Value)
				}
				ids[a.Value] = true
			case a.Name.Local == "href" && strings.HasPrefix(a.Value, "#"):
				refs = append(refs, a.Value[1:])
			case a.Name.Local == "aria-labelledby":
				refs = append(refs, a.Value)
			}
		}
	}
	for _, r := range refs {
		if !ids[r] {
			t.Errorf("nothing has the id %s", r)
		}
	}
}

func TestTree(t *testing.T) { checkTree(t, string(write(t, page(t)))) }

// Sections without their input are left out.
func TestOptionalSections(t *testing.T) {
	full := string(write(t, page(t)))
	bare := string(write(t, report.Page{Record: testRecord(proj.CRS()), Release: coarse(), Projection: proj}))
	for _, what := range []string{"<h3>Stability</h3>", "<h3>Criterion: ", "Regions with less and with more smoothing", `id="l-study"`, `id="l-context"`, "They happened from"} {
		if !strings.Contains(full, what) || strings.Contains(bare, what) {
			t.Errorf("%s: in the full page %t, in the bare one %t", what, strings.Contains(full, what), strings.Contains(bare, what))
		}
	}
	if !strings.Contains(bare, "What H balances") || !strings.Contains(bare, "When they happened is not known") {
		t.Error("the bare page lacks what the record alone gives")
	}
	for _, c := range record.Cautions() {
		if !strings.Contains(bare, html.EscapeString(c)) {
			t.Errorf("caution missing: %s", c)
		}
	}
	if err := report.WriteHTML(&bytes.Buffer{}, report.Page{}); !errors.Is(err, report.ErrIncomplete) {
		t.Errorf("an empty page: %v", err)
	}
}

// A plane without a place has no degrees and no north.
func TestPlaceless(t *testing.T) {
	ref, err := spatial.ParseCRS("plane")
	if err != nil {
		t.Fatal(err)
	}
	rec := testRecord(ref.CRS)
	rec.CRS.Distortion = nil
	s := string(write(t, report.Page{Record: rec, Release: release(t, 120, 4, ref.Projection, 1), Projection: ref.Projection}))
	if strings.Contains(s, `class="north"`) || strings.Contains(s, "° N") || !strings.Contains(s, "Metres on a plane without a place") {
		t.Error("a plane without a place shows degrees or north")
	}
}

// A map of 1024 x 1024 nodes with 30 bands stays within 1.5 MB.
func TestSize(t *testing.T) {
	if testing.Short() {
		t.Skip("draws a large map")
	}
	p := page(t)
	p.Release = release(t, 1024, 30, proj, 1)
	from := time.Now()
	b := write(t, p)
	t.Logf("%d bytes in %v", len(b), time.Since(from))
	if len(b) > 1_500_000 {
		t.Errorf("%d bytes, at most 1,500,000", len(b))
	}
}

func BenchmarkWriteHTML(b *testing.B) {
	p := page(b)
	for b.Loop() {
		write(b, p)
	}
}
