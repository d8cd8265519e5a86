package main_test

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"

	"drumlin/cmd/drumlin/internal/cli"
	"drumlin/mv"
	"drumlin/spatial"
)

// realSets are open data that nobody here made: see testdata/README.md.
var realSets = []struct {
	name, x, y string
	cut        bool // crosses the antimeridian
}{
	{"fiji-quakes", "long", "lat", true},
	{"us-airports", "longitude", "latitude", true},
}

func eventFile(name string) string { return filepath.Join("..", "..", "testdata", "events", name) }

// bundleOf is a bundle read back without the program's own code.
type bundleOf struct {
	dir      string
	n        float64     // events mapped
	events   []orb.Point // raw rows, degrees, longitudes in [-180, 180]
	plane    spatial.Projection
	h        mv.BandwidthMatrix
	regions  []feature
	bands    []feature
	peaks    []feature
	record   runRecord
	recorded []byte
}

type feature struct {
	ID         string
	Properties map[string]float64 // the numbers among them
	Geometry   json.RawMessage
	Shape      orb.MultiPolygon // of polygons
}

type runRecord struct {
	Rows struct {
		Read, Used    int64
		OutsideExtent int64 `json:"outside_extent"`
		SetAside      []struct {
			Reason string
			Rows   int64
		} `json:"set_aside"`
	}
	CRS struct {
		Plane struct {
			Method string
			Lat0   float64 `json:"lat0_deg"`
			Lon0   float64 `json:"lon0_deg"`
		}
	}
	Lattice struct {
		Step  []float64 `json:"step_m"`
		Nodes []int
	}
	Bandwidth struct {
		Matrix []float64 `json:"matrix_m2"`
	}
	Regions struct{ Contents []float64 }
	Guard   struct {
		FloorPerKM2 float64 `json:"floor_per_km2"`
	}
}

// mapInProcess runs the program without a process of its own.
func mapInProcess(t *testing.T, args ...string) (stdout, stderr string) {
	t.Helper()
	var out, errs bytes.Buffer
	if status := cli.Main(append([]string{"map"}, args...), &out, &errs); status != 0 {
		t.Fatalf("drumlin map %s: status %d: %s", strings.Join(args, " "), status, errs.String())
	}
	return out.String(), errs.String()
}

// rawEvents reads the coordinates of a CSV file.
func rawEvents(t *testing.T, path, x, y string) []orb.Point {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	kx, ky := slices.Index(rows[0], x), slices.Index(rows[0], y)
	var out []orb.Point
	for _, r := range rows[1:] {
		lon, err1 := strconv.ParseFloat(r[kx], 64)
		lat, err2 := strconv.ParseFloat(r[ky], 64)
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		if lon > 180 {
			lon -= 360
		}
		if lon == 180 {
			lon -= 1e-9 // on the cut itself: a crossing count would put it on neither side
		}
		out = append(out, orb.Point{lon, lat})
	}
	return out
}

func readBundle(t *testing.T, dir string) *bundleOf {
	t.Helper()
	b := &bundleOf{dir: dir}
	var err error
	if b.recorded, err = os.ReadFile(filepath.Join(dir, "run.json")); err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(b.recorded, &b.record); err != nil {
		t.Fatal(err)
	}
	b.n = float64(b.record.Rows.Used)
	if m := b.record.CRS.Plane.Method; m != "LAEA" {
		t.Fatalf("plane %q", m)
	}
	b.plane = spatial.AutoPlane(b.record.CRS.Plane.Lon0, b.record.CRS.Plane.Lat0)
	if b.h, err = mv.NewBandwidthMatrix(2, b.record.Bandwidth.Matrix); err != nil {
		t.Fatal(err)
	}
	b.regions = readFeatures(t, filepath.Join(dir, "regions.geojson"))
	b.bands = readFeatures(t, filepath.Join(dir, "contours.geojson"))
	b.peaks = readFeatures(t, filepath.Join(dir, "peaks.geojson"))
	return b
}

func readFeatures(t *testing.T, path string) []feature {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var c struct {
		Type     string
		Features []struct {
			Type, ID   string
			Properties map[string]any
			Geometry   json.RawMessage
		}
	}
	if err := json.Unmarshal(text, &c); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	var out []feature
	for _, f := range c.Features {
		if f.Type != "Feature" {
			t.Fatalf("%s: %s has type %q", path, f.ID, f.Type)
		}
		g := feature{ID: f.ID, Properties: map[string]float64{}, Geometry: f.Geometry}
		for k, v := range f.Properties {
			if x, ok := v.(float64); ok {
				g.Properties[k] = x
			}
		}
		var shape struct {
			Type        string
			Coordinates json.RawMessage
		}
		if err := json.Unmarshal(f.Geometry, &shape); err != nil {
			t.Fatal(err)
		}
		if shape.Type == "MultiPolygon" {
			if err := json.Unmarshal(shape.Coordinates, &g.Shape); err != nil {
				t.Fatal(err)
			}
		}
		out = append(out, g)
	}
	return out
}

// locator tells which points lie inside a set of rings, by crossings; edges are
// sorted into strips of latitude.
type locator struct {
	lo, width float64
	strips    [][][2]orb.Point
}

func newLocator(rings ...orb.Ring) *locator {
	l := &locator{strips: make([][][2]orb.Point, 1024)}
	hi := math.Inf(-1)
	l.lo = math.Inf(1)
	for _, r := range rings {
		for _, p := range r {
			l.lo, hi = min(l.lo, p[1]), max(hi, p[1])
		}
	}
	l.width = (hi - l.lo) / float64(len(l.strips)) * (1 + 1e-9)
	for _, r := range rings {
		for i := 1; i < len(r); i++ {
			a, b := r[i-1], r[i]
			for k := l.strip(min(a[1], b[1])); k <= l.strip(max(a[1], b[1])); k++ {
				l.strips[k] = append(l.strips[k], [2]orb.Point{a, b})
			}
		}
	}
	return l
}

func (l *locator) strip(lat float64) int { return int((lat - l.lo) / l.width) }

func (l *locator) holds(p orb.Point) bool {
	if !(p[1] >= l.lo) {
		return false
	}
	k := l.strip(p[1])
	if k >= len(l.strips) {
		return false
	}
	in := false
	for _, e := range l.strips[k] {
		a, b := e[0], e[1]
		if (a[1] > p[1]) != (b[1] > p[1]) && p[0] < a[0]+(p[1]-a[1])/(b[1]-a[1])*(b[0]-a[0]) {
			in = !in
		}
	}
	return in
}

func (l *locator) count(points []orb.Point) (n float64) {
	for _, p := range points {
		if l.holds(p) {
			n++
		}
	}
	return n
}

func ringsOf(m orb.MultiPolygon) (out []orb.Ring) {
	for _, p := range m {
		out = append(out, p...)
	}
	return out
}

func TestRealSets(t *testing.T) {
	for _, set := range realSets {
		t.Run(set.name, func(t *testing.T) {
			if testing.Short() && set.name != "fiji-quakes" {
				t.Skip("one set will do with -short")
			}
			dir := filepath.Join(t.TempDir(), "map")
			mapInProcess(t, eventFile(set.name+".parquet"), "--x", set.x, "--y", set.y, "--crs", "EPSG:4326", "--out", dir)
			b := readBundle(t, dir)
			b.events = rawEvents(t, eventFile(set.name+".csv"), set.x, set.y)
			if len(b.regions) != 3 || len(b.bands) < 5 || len(b.peaks) == 0 {
				t.Fatalf("%d regions, %d bands, %d peaks", len(b.regions), len(b.bands), len(b.peaks))
			}
			t.Run("rfc7946", b.checkRFC)
			t.Run("valid", b.checkValid)
			t.Run("events", b.checkEvents)
			t.Run("mass", b.checkMass)
			t.Run("areas", b.checkAreas)
			t.Run("guard", b.checkGuard)
			t.Run("partition", b.checkPartition)
			t.Run("antimeridian", func(t *testing.T) { b.checkAntimeridian(t, set.cut) })
			t.Run("other programs", b.checkOtherPrograms)
		})
	}
}

func (b *bundleOf) polygons() []feature { return append(slices.Clone(b.regions), b.bands...) }

// checkRFC holds the files to RFC 7946: objects, members, closure, winding,
// ranges, digits.
func (b *bundleOf) checkRFC(t *testing.T) {
	long := regexp.MustCompile(`-?\d+\.\d{8,}`)
	for _, name := range []string{"regions.geojson", "contours.geojson", "peaks.geojson"} {
		text, err := os.ReadFile(filepath.Join(b.dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if !json.Valid(text) || text[0] != '{' {
			t.Errorf("%s is no JSON object", name)
		}
		var c struct {
			Type string
			BBox []float64
		}
		var members map[string]json.RawMessage
		if json.Unmarshal(text, &c) != nil || json.Unmarshal(text, &members) != nil || c.Type != "FeatureCollection" {
			t.Errorf("%s is a %q", name, c.Type)
		}
		for _, m := range []string{"crs", "coordinates", "geometry", "properties"} {
			if _, ok := members[m]; ok {
				t.Errorf("%s has a member %s", name, m)
			}
		}
		if bytes.Contains(text, []byte(`"crs"`)) {
			t.Errorf("%s mentions a crs", name)
		}
		for _, f := range readFeatures(t, filepath.Join(b.dir, name)) {
			if long.Match(f.Geometry) {
				t.Errorf("%s %s: %s has more than 7 decimals", name, f.ID, long.Find(f.Geometry))
			}
			checkBBox(t, name+" "+f.ID, c.BBox, f)
		}
	}
	for _, f := range b.polygons() {
		for i, p := range f.Shape {
			for k, r := range p {
				at := fmt.Sprintf("%s polygon %d ring %d", f.ID, i+1, k+1)
				if len(r) < 4 || r[0] != r[len(r)-1] {
					t.Errorf("%s is not closed", at)
				}
				var area float64
				for j := 1; j < len(r); j++ {
					area += (r[j-1][0]-r[0][0])*(r[j][1]-r[0][1]) - (r[j][0]-r[0][0])*(r[j-1][1]-r[0][1])
					if r[j] == r[j-1] {
						t.Errorf("%s holds %v twice", at, r[j])
					}
				}
				if (area > 0) != (k == 0) {
					t.Errorf("%s is wound the wrong way", at)
				}
			}
		}
	}
	for i, f := range b.peaks {
		var g struct {
			Type        string
			Coordinates []float64
		}
		if err := json.Unmarshal(f.Geometry, &g); err != nil || g.Type != "Point" || len(g.Coordinates) != 2 {
			t.Errorf("%s is %s", f.ID, f.Geometry)
			continue
		}
		if math.Abs(g.Coordinates[0]) > 180 || math.Abs(g.Coordinates[1]) > 90 {
			t.Errorf("%s lies at %v", f.ID, g.Coordinates)
		}
		if f.Properties["rank"] != float64(i+1) || i > 0 && f.Properties["intensity_per_km2"] > b.peaks[i-1].Properties["intensity_per_km2"] {
			t.Errorf("%s is out of order", f.ID)
		}
		if d := f.Properties["intensity_per_km2"] - f.Properties["smoothing_bias_per_km2"] - f.Properties["debiased_per_km2"]; math.Abs(d) > 2e-6*f.Properties["intensity_per_km2"] {
			t.Errorf("%s: debiased is off by %g", f.ID, d)
		}
		if f.Properties["effective_events"] < 10 {
			t.Errorf("%s rests on %g events", f.ID, f.Properties["effective_events"])
		}
	}
}

// checkBBox wants every position on the globe and inside the collection's box,
// which may run over the antimeridian (west > east).
func checkBBox(t *testing.T, at string, box []float64, f feature) {
	if len(box) != 4 || box[1] > box[3] {
		t.Fatalf("%s: bbox %v", at, box)
	}
	for _, r := range ringsOf(f.Shape) {
		for _, p := range r {
			in := p[0] >= box[0] && p[0] <= box[2]
			if box[0] > box[2] {
				in = p[0] >= box[0] || p[0] <= box[2]
			}
			if !in || p[1] < box[1] || p[1] > box[3] || math.Abs(p[0]) > 180 || math.Abs(p[1]) > 90 {
				t.Fatalf("%s: %v lies outside %v", at, p, box)
			}
		}
	}
}

// checkValid asks another library whether the polygons are valid.
func (b *bundleOf) checkValid(t *testing.T) {
	for _, f := range b.polygons() {
		g, err := geom.UnmarshalGeoJSON(f.Geometry, geom.NoValidate{})
		if err != nil {
			t.Errorf("%s: %v", f.ID, err)
			continue
		}
		if err := g.Validate(); err != nil {
			t.Errorf("%s: %v", f.ID, err)
		}
		if g.IsEmpty() {
			t.Errorf("%s is empty", f.ID)
		}
	}
}

// checkEvents counts the raw rows in every polygon.
func (b *bundleOf) checkEvents(t *testing.T) {
	if int64(len(b.events)) != b.record.Rows.Read {
		t.Errorf("%d rows read, the file has %d", b.record.Rows.Read, len(b.events))
	}
	for _, f := range b.polygons() {
		got := newLocator(ringsOf(f.Shape)...).count(b.events)
		p := f.Properties
		if got < p["events_min"] || got > p["events_max"] || p["events"] < p["events_min"] || p["events"] > p["events_max"] {
			t.Errorf("%s: events %g, bounds %g to %g, counted %g", f.ID, p["events"], p["events_min"], p["events_max"], got)
		}
		if math.Abs(got-p["events"]) > 0.01*b.n {
			t.Errorf("%s: events %g, counted %g of %g", f.ID, p["events"], got, b.n)
		}
		share, ok := p["event_share"]
		if ok && math.Abs(share-p["events"]/b.n) > 0.5/b.n+1e-6 {
			t.Errorf("%s: event_share %g, events %g of %g", f.ID, share, p["events"], b.n)
		}
		if strings.HasPrefix(f.ID, "region") {
			if !ok {
				t.Errorf("%s has no event_share", f.ID)
			}
			if d := got/b.n - p["content"]; math.Abs(d) > 0.05 {
				t.Errorf("%s holds %.3f of the events", f.ID, got/b.n)
			}
		}
	}
}

// checkMass draws from the estimate: an event, moved by a normal step with
// covariance H on the plane of the estimate.
func (b *bundleOf) checkMass(t *testing.T) {
	const draws = 100_000
	r := rand.New(rand.NewPCG(2026, 12))
	var q spatial.LonLats
	for _, e := range b.events {
		q.Lon, q.Lat = append(q.Lon, e[0]), append(q.Lat, e[1])
	}
	xy := b.plane.Forward(q)
	h11, h12, h22 := b.h.At(0, 0), b.h.At(0, 1), b.h.At(1, 1)
	l11 := math.Sqrt(h11)
	l21 := h12 / l11
	l22 := math.Sqrt(h22 - l21*l21)
	var drawn spatial.XYs
	for range draws {
		i := r.IntN(len(xy.X))
		u, v := r.NormFloat64(), r.NormFloat64()
		drawn.X, drawn.Y = append(drawn.X, xy.X[i]+l11*u), append(drawn.Y, xy.Y[i]+l21*u+l22*v)
	}
	back := b.plane.Inverse(drawn)
	points := make([]orb.Point, draws)
	for i := range points {
		points[i] = orb.Point{math.Remainder(back.Lon[i], 360), back.Lat[i]}
	}
	for _, f := range b.regions {
		got := newLocator(ringsOf(f.Shape)...).count(points) / draws
		want := f.Properties["mass"]
		tolerance := 4*math.Sqrt(want*(1-want)/draws) + 0.005
		if math.Abs(got-want) > tolerance {
			t.Errorf("%s: mass %.5f, drawn %.5f, tolerance %.5f", f.ID, want, got, tolerance)
		}
		mean := want * b.n / f.Properties["area_km2"]
		if m := f.Properties["mean_per_km2"]; math.Abs(m-mean) > 1e-4*mean {
			t.Errorf("%s: mean %g, mass and area give %g", f.ID, m, mean)
		}
	}
}

// checkAreas measures the shapes on the ellipsoid.
func (b *bundleOf) checkAreas(t *testing.T) {
	var last float64
	for _, f := range b.polygons() {
		got, want := spatial.EllipsoidArea(f.Shape)/1e6, f.Properties["area_km2"]
		if math.Abs(got-want) > 0.005*want {
			t.Errorf("%s: area %g, on the ellipsoid %g km2", f.ID, want, got)
		}
	}
	for _, f := range b.regions {
		if a := f.Properties["area_km2"]; a <= last {
			t.Errorf("%s is no larger than the region before", f.ID)
		} else {
			last = a
		}
	}
}

// checkGuard counts the raw rows in every part and every hole. Parts that were
// cut at the antimeridian are put together first.
func (b *bundleOf) checkGuard(t *testing.T) {
	parts, holes := 0, 0
	for _, f := range b.polygons() {
		whole, moved := f.Shape, b.events
		if touchesCut(f.Shape) {
			whole, moved = rejoin(t, f.Shape), shift(b.events)
		}
		for _, p := range whole {
			parts++
			if n := newLocator(p...).count(moved); n < 10 {
				t.Errorf("%s: a part at %v holds %g events", f.ID, p[0][0], n)
			}
			for _, h := range p[1:] {
				holes++
				if n := newLocator(h).count(moved); n < 10 {
					t.Errorf("%s: a hole at %v holds %g events", f.ID, h[0], n)
				}
			}
		}
	}
	t.Logf("%d parts, %d holes", parts, holes)
}

func touchesCut(m orb.MultiPolygon) bool {
	for _, r := range ringsOf(m) {
		for _, p := range r {
			if math.Abs(p[0]) == 180 {
				return true
			}
		}
	}
	return false
}

// shift moves negative longitudes to the other side of the antimeridian.
func shift(points []orb.Point) []orb.Point {
	out := slices.Clone(points)
	for i, p := range out {
		if p[0] < 0 {
			out[i][0] = p[0] + 360
		}
	}
	return out
}

// rejoin undoes the cut at the antimeridian by another library's union.
func rejoin(t *testing.T, m orb.MultiPolygon) orb.MultiPolygon {
	moved := m.Clone()
	for _, p := range moved {
		west := false
		for _, v := range p[0] {
			west = west || v[0] < 0
		}
		for _, r := range p {
			for i := range r {
				if west {
					r[i][0] += 360
				}
				r[i][0] = math.Round(r[i][0]*1e7) / 1e7
			}
		}
	}
	u, err := geom.UnaryUnion(asGeometry(t, moved, geom.NoValidate{}))
	if err != nil {
		t.Fatal(err)
	}
	text, err := u.MarshalJSON()
	if err != nil {
		t.Fatal(err)
	}
	var g struct {
		Type        string
		Coordinates json.RawMessage
	}
	var out orb.MultiPolygon
	if err := json.Unmarshal(text, &g); err != nil {
		t.Fatal(err)
	}
	if g.Type == "Polygon" {
		out = make(orb.MultiPolygon, 1)
		err = json.Unmarshal(g.Coordinates, &out[0])
	} else {
		err = json.Unmarshal(g.Coordinates, &out)
	}
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func asGeometry(t *testing.T, m orb.MultiPolygon, opts ...geom.NoValidate) geom.Geometry {
	t.Helper()
	coordinates, err := json.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	g, err := geom.UnmarshalGeoJSON([]byte(`{"type":"MultiPolygon","coordinates":`+string(coordinates)+`}`), opts...)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// checkPartition wants the bands to cover what lies above the lowest level
// without overlap: the area of the union is the sum of the areas, and bands that
// follow each other share no area.
func (b *bundleOf) checkPartition(t *testing.T) {
	var all []geom.Geometry
	var sum float64
	for i, f := range b.bands {
		g := asGeometry(t, f.Shape)
		sum += g.Area()
		if i > 0 {
			shared, err := geom.Intersection(g, all[i-1])
			if err != nil {
				t.Fatal(err)
			}
			if a := shared.Area(); a > 1e-9*g.Area() {
				t.Errorf("%s and %s share %g of the area", b.bands[i-1].ID, f.ID, a/g.Area())
			}
		}
		if i > 0 && f.Properties["from_per_km2"] < b.bands[i-1].Properties["to_per_km2"] {
			t.Errorf("%s begins below the end of %s", f.ID, b.bands[i-1].ID)
		}
		all = append(all, g)
	}
	union, err := geom.UnionMany(all)
	if err != nil {
		t.Fatal(err)
	}
	if a := union.Area(); math.Abs(a-sum) > 1e-8*sum {
		t.Errorf("the bands' areas add up to %.12g square degrees, their union has %.12g", sum, a)
	}
	if low, floor := b.bands[0].Properties["from_per_km2"], b.record.Guard.FloorPerKM2; math.Abs(low-floor) > 1e-6*floor {
		t.Errorf("lowest level %g, floor %g", low, floor)
	}
}

// checkAntimeridian wants no edge across 180 degrees, and every cut to leave
// the same latitudes on both sides.
func (b *bundleOf) checkAntimeridian(t *testing.T, cut bool) {
	seen := false
	for _, f := range b.polygons() {
		var west, east []float64
		for _, r := range ringsOf(f.Shape) {
			for i := 1; i < len(r); i++ {
				if math.Abs(r[i][0]-r[i-1][0]) > 180 {
					t.Fatalf("%s: an edge from %v to %v", f.ID, r[i-1], r[i])
				}
				switch r[i][0] {
				case 180:
					west = append(west, r[i][1])
				case -180:
					east = append(east, r[i][1])
				}
			}
		}
		slices.Sort(west)
		slices.Sort(east)
		if !slices.Equal(west, east) {
			t.Errorf("%s: latitudes %v at 180, %v at -180", f.ID, west, east)
		}
		seen = seen || len(west) > 0
	}
	if seen && !cut || !seen && cut && strings.Contains(b.dir, "fiji") {
		t.Errorf("cut at the antimeridian: %v", seen)
	}
}

// checkOtherPrograms opens the files with what people have.
func (b *bundleOf) checkOtherPrograms(t *testing.T) {
	run := func(name string, args ...string) string {
		t.Helper()
		if _, err := exec.LookPath(name); err != nil {
			demand(t, "%s is not installed: the files were not opened with it", name)
		}
		out, err := exec.Command(name, args...).CombinedOutput()
		if err != nil {
			t.Errorf("%s %v: %v\n%s", name, args, err, out)
		}
		// A wide lattice has corners where the plane shows no place.
		out = bytes.ReplaceAll(out, []byte("ERROR 1: Point outside of projection domain\n"), nil)
		for _, bad := range []string{"ERROR", "Warning", "FAILURE"} {
			if bytes.Contains(out, []byte(bad)) {
				t.Errorf("%s %v says:\n%s", name, args, out)
			}
		}
		return string(out)
	}
	for name, n := range map[string]int{"regions": len(b.regions), "contours": len(b.bands), "peaks": len(b.peaks)} {
		out := run("ogrinfo", "-ro", "-so", "-al", filepath.Join(b.dir, name+".geojson"))
		if !strings.Contains(out, fmt.Sprintf("Feature Count: %d\n", n)) || !strings.Contains(out, "WGS 84") {
			t.Errorf("ogrinfo on %s:\n%s", name, out)
		}
	}
	out := run("gdalinfo", "-stats", filepath.Join(b.dir, "surface.tif"))
	os.Remove(filepath.Join(b.dir, "surface.tif.aux.xml"))
	step := b.record.Lattice.Step
	for _, want := range []string{
		fmt.Sprintf("Size is %d, %d\n", b.record.Lattice.Nodes[0], b.record.Lattice.Nodes[1]),
		fmt.Sprintf("Pixel Size = (%.15f,-%.15f)", step[0], step[1]),
		"Type=Float32", "Lambert Azimuthal Equal Area",
	} {
		if !strings.Contains(out, want) {
			t.Errorf("gdalinfo lacks %q:\n%s", want, out)
		}
	}
	// The peak of the surface is that of the peaks file, but for what lies
	// between nodes and float32.
	if m := regexp.MustCompile(`STATISTICS_MAXIMUM=(\S+)`).FindStringSubmatch(out); m == nil {
		t.Errorf("gdalinfo gives no maximum:\n%s", out)
	} else if v, err := strconv.ParseFloat(m[1], 64); err != nil || math.Abs(v/b.peaks[0].Properties["intensity_per_km2"]-1) > 0.02 {
		t.Errorf("surface up to %s, highest peak %g", m[1], b.peaks[0].Properties["intensity_per_km2"])
	}
}

// TestNullIsland adds seven mistaken airports: at exactly 0,0, which is set aside
// by its own reason, and a hundredth of a degree beside it, which the robust
// extent must leave outside where it would stretch the lattice. Either way the
// map is as if the seven were not there.
func TestNullIsland(t *testing.T) {
	if testing.Short() {
		t.Skip("left out with -short: testdata/script/rows.txtar has a small form of it")
	}
	dir := t.TempDir()
	f, err := os.Open(eventFile("us-airports.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	kx, ky := slices.Index(rows[0], "longitude"), slices.Index(rows[0], "latitude")
	var all, states [][]string
	for _, r := range rows[1:] {
		all = append(all, []string{r[kx], r[ky]})
		lon, err1 := strconv.ParseFloat(r[kx], 64)
		lat, err2 := strconv.ParseFloat(r[ky], 64)
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		if lon > -125 && lon < -66 && lat > 24 && lat < 50 {
			states = append(states, all[len(all)-1])
		}
	}
	seven := func(v string) (rows [][]string) {
		for range 7 {
			rows = append(rows, []string{v, v})
		}
		return rows
	}
	run := func(name string, rows ...[]string) (*bundleOf, string) {
		path := filepath.Join(dir, name+".csv")
		f, err := os.Create(path)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		w := csv.NewWriter(f)
		if err := w.WriteAll(append([][]string{{"lon", "lat"}}, rows...)); err != nil {
			t.Fatal(err)
		}
		_, said := mapInProcess(t, path, "--out", filepath.Join(dir, name))
		return readBundle(t, filepath.Join(dir, name)), said
	}
	plain, _ := run("plain", all...)
	zero, _ := run("zero", append(slices.Clone(all), seven("0")...)...)
	if !slices.Equal(plain.record.Lattice.Step, zero.record.Lattice.Step) {
		t.Errorf("lattice step %v, without the strays %v", zero.record.Lattice.Step, plain.record.Lattice.Step)
	}
	if got := zero.record.Rows.SetAside; len(got) != 1 || got[0].Reason != "null-island" || got[0].Rows != 7 {
		t.Errorf("set aside %+v, want 7 at null-island", got)
	}
	sameMap(t, plain, zero)
	plain, _ = run("plain-states", states...)
	zero, said := run("zero-states", append(slices.Clone(states), seven("0.01")...)...)
	p, z := plain.record.Rows, zero.record.Rows
	if z.OutsideExtent != 7 || p.OutsideExtent != 0 || z.Read != p.Read+7 || z.Used != p.Used {
		t.Errorf("rows %+v, without the strays %+v", z, p)
	}
	if !strings.Contains(said, "7 events lie far outside the rest") {
		t.Errorf("stderr: %q", said)
	}
	sameMap(t, plain, zero)
}

// sameMap compares the map files of two bundles byte by byte.
func sameMap(t *testing.T, plain, zero *bundleOf) {
	t.Helper()
	for _, name := range []string{"regions.geojson", "contours.geojson", "peaks.geojson", "surface.tif"} {
		a, err1 := os.ReadFile(filepath.Join(plain.dir, name))
		c, err2 := os.ReadFile(filepath.Join(zero.dir, name))
		if err1 != nil || err2 != nil || !bytes.Equal(a, c) {
			t.Errorf("%s differs with the strays", name)
		}
	}
}
