package spatial_test

import (
	"bufio"
	"fmt"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"testing"

	"drumlin/spatial"
)

// group is one coordinate reference system of the reference file.
type group struct {
	label, name, params string
	at                  []spatial.LonLat
	want                []spatial.XY
}

func readReference(t *testing.T) []group {
	t.Helper()
	path := "../testdata/reference/proj_reference.csv"
	if other := os.Getenv("DRUMLIN_PROJ_REFERENCE"); other != "" {
		path = other // a larger file from the same generator
	}
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var groups []group
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		text := lines.Text()
		if heading, ok := strings.CutPrefix(text, "# "); ok {
			if part := strings.Split(heading, ";"); len(part) == 3 {
				groups = append(groups, group{label: part[0], name: part[1], params: part[2]})
			}
			continue
		}
		var v [4]float64
		for i, s := range strings.Split(text, ",") {
			if v[i], err = strconv.ParseFloat(s, 64); err != nil {
				t.Fatal(err)
			}
		}
		g := &groups[len(groups)-1]
		g.at = append(g.at, spatial.LonLat{Lon: v[0], Lat: v[1]})
		g.want = append(g.want, spatial.XY{X: v[2], Y: v[3]})
	}
	if err := lines.Err(); err != nil {
		t.Fatal(err)
	}
	return groups
}

// parseParams reads PROJ's notation into a CRS.
func parseParams(t *testing.T, s string) spatial.CRS {
	t.Helper()
	var c spatial.CRS
	number := map[string]*float64{
		"lat_0": &c.Lat0, "lon_0": &c.Lon0, "lat_1": &c.Lat1, "lat_2": &c.Lat2,
		"k": &c.K0, "k_0": &c.K0, "x_0": &c.FE, "y_0": &c.FN,
	}
	for _, word := range strings.Fields(s) {
		key, value, _ := strings.Cut(strings.TrimPrefix(word, "+"), "=")
		switch key {
		case "proj":
			c.Method = map[string]string{"laea": "LAEA", "aea": "AEA", "lcc": "LCC", "tmerc": "TM", "utm": "TM", "webmerc": "WebMercator"}[value]
			if value == "utm" {
				c.K0, c.FE = 0.9996, 500000
			}
		case "zone":
			z, err := strconv.Atoi(value)
			if err != nil {
				t.Fatal(err)
			}
			c.Lon0 = float64(6*z - 183)
		case "south":
			c.FN = 1e7
		case "ellps":
			c.Ellipsoid = map[string]string{"GRS80": "GRS 80", "WGS84": "WGS 84", "airy": "Airy 1830", "clrk66": "Clarke 1866",
				"intl": "International 1924", "bessel": "Bessel 1841", "krass": "Krassowsky 1940"}[value]
		default:
			v, err := strconv.ParseFloat(value, 64)
			if err != nil || number[key] == nil {
				t.Fatalf("parameter %q", word)
			}
			*number[key] = v
		}
	}
	if c.Method == "LCC" && c.Lat2 == 0 && !strings.Contains(s, "lat_2") {
		c.Lat2 = c.Lat1
	}
	return c
}

// TestReference holds every system in the table, and aspects that no code
// uses, against PROJ: coordinates to 1 mm, parameters as printed, names. The
// way back must close to 1e-6 m. 1 mm is ten times the rounding in the file.
func TestReference(t *testing.T) {
	const tolerance = 1e-3
	seen := map[int]bool{}
	for _, g := range readReference(t) {
		t.Run(g.label+" "+g.name, func(t *testing.T) {
			want := parseParams(t, g.params)
			var p spatial.Projection
			if g.label == "own" {
				var err error
				if p, err = spatial.NewProjection(want); err != nil {
					t.Fatal(err)
				}
			} else {
				ref, err := spatial.ParseCRS(g.label)
				if err != nil {
					t.Fatal(err)
				}
				p = ref.Projection
				code, _ := strconv.Atoi(strings.TrimPrefix(g.label, "EPSG:"))
				seen[code] = true
				if got := ref.CRS; got.Name != g.name && (code < 6669 || code > 6687) {
					t.Errorf("name %q, EPSG has %q", got.Name, g.name)
				}
				got := p.CRS()
				got.ID, got.Name = "", ""
				near(t, "parameters", got, want)
			}
			on := columns(g.at)
			xy := p.Forward(on)
			for i, w := range g.want {
				if d := math.Hypot(xy.X[i]-w.X, xy.Y[i]-w.Y); !(d < tolerance) {
					t.Errorf("%v: %.4f, %.4f, PROJ %.4f, %.4f", g.at[i], xy.X[i], xy.Y[i], w.X, w.Y)
				}
			}
			back := p.Inverse(xy)
			for i, w := range g.at {
				if d := groundDistance(back.Lon[i], back.Lat[i], w.Lon, w.Lat); !(d < 1e-6) {
					t.Errorf("%v comes back as %.12f, %.12f: %.3g m off", w, back.Lon[i], back.Lat[i], d)
				}
			}
		})
	}
	for _, code := range spatial.RegisteredGrids() {
		if !seen[code] {
			t.Errorf("EPSG:%d has no reference values", code)
		}
	}
}

// near compares parameters to the 12 decimals PROJ prints.
func near(t *testing.T, what string, got, want spatial.CRS) {
	t.Helper()
	a := []float64{got.Lat0, got.Lon0, got.Lat1, got.Lat2, got.K0, got.FE, got.FN}
	b := []float64{want.Lat0, want.Lon0, want.Lat1, want.Lat2, want.K0, want.FE, want.FN}
	if got.Method != want.Method || got.Ellipsoid != want.Ellipsoid ||
		!slices.EqualFunc(a, b, func(x, y float64) bool { return math.Abs(x-y) < 1e-11 }) {
		t.Errorf("%s %+v, EPSG has %+v", what, got, want)
	}
}

func columns(at []spatial.LonLat) spatial.LonLats {
	var c spatial.LonLats
	for _, p := range at {
		c.Lon, c.Lat = append(c.Lon, p.Lon), append(c.Lat, p.Lat)
	}
	return c
}

// groundDistance is good for neighbouring positions, in metres.
func groundDistance(lon1, lat1, lon2, lat2 float64) float64 {
	const m = 6378137 * math.Pi / 180
	return m * math.Hypot(math.Remainder(lon1-lon2, 360)*math.Cos(lat1*math.Pi/180), lat1-lat2)
}

func ExampleParseCRS() {
	for _, s := range []string{"EPSG:32631", "OGC:CRS84", "plane", "EPSG:27700"} {
		ref, err := spatial.ParseCRS(s)
		if err != nil {
			fmt.Println(err)
			continue
		}
		fmt.Println(ref.CRS.Name, ref.Geographic, ref.Plane)
	}
	// Output:
	// WGS 84 / UTM zone 31N false false
	// WGS 84 true false
	// plane, metres without a place false true
	// spatial: coordinate reference system not supported: EPSG:27700 (OSGB36 / British National Grid) needs the datum shift of OSGB36, which is not built in; convert the coordinates to EPSG:4326 first
}
