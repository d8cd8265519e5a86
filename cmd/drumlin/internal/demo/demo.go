// Package demo invents an extract of events so that the program can be tried
// without any data. Nothing in it is real: the island of Skerrin and its town
// of Varrowmouth stand in open ocean, where nobody lives, and the call-outs of
// its rescue service come from a seeded generator.
package demo

import (
	"math"
	"math/rand/v2"
	"time"

	"drumlin/io/parquetfile"
	"drumlin/spatial"
)

// Seed of the extract that the demo command writes.
const Seed = 20310417

// Centre of Skerrin, degrees: open water of the North Atlantic.
var centre = spatial.LonLat{Lon: -38, Lat: 47}

// Place is a named spot of the island.
type Place struct {
	Name string
	At   spatial.LonLat
}

// source is one cause of events: an oriented normal clump, in metres around
// the centre.
type source struct {
	place          string
	x, y           float64 // middle
	long, short    float64 // standard deviations along and across
	angle          float64 // of the long axis, degrees anticlockwise from east
	share          float64 // of all events
	slips          float64 // share of category slip, the rest is drift
	growth, summer float64 // second year over first; weight of June to August
}

var sources = []source{
	{"the Long Quay", 100, -250, 800, 260, 35, 0.26, 0.85, 1.0, 1.3},
	{"the Ferry Steps", 1600, 900, 380, 300, 35, 0.09, 0.6, 1.1, 1.6},
	{"the Old Breakwater", 2200, -1300, 750, 240, -25, 0.14, 0.15, 0.9, 1.1},
	{"Ropewalk Lane", -1700, 800, 600, 270, 80, 0.14, 0.95, 1.0, 1.0},
	{"Gannet Sands", 3600, 2900, 1000, 360, 60, 0.15, 0.35, 1.6, 3.0},
	{"Upper Mere", -3000, 3300, 550, 450, 10, 0.08, 0.9, 1.0, 1.0},
	{"", 0, 700, 2300, 1700, 20, 0.14, 0.7, 1.0, 1.2},
}

const rows = 40000

// Extract returns the columns time, category, severity, lon and lat, with a
// few rows such as real extracts hold: set to 0,0 by mistake, without a
// latitude, or with an impossible one.
func Extract(seed uint64) []parquetfile.Column {
	rng := rand.New(rand.NewPCG(seed, 1))
	var x, y []float64
	var category []string
	var severity []int64
	var when []time.Time
	first := time.Date(2031, 1, 1, 0, 0, 0, 0, time.UTC)
	const days = 731 // 2031 and the leap year 2032
	for len(x) < rows {
		s := pick(rng)
		day := rng.IntN(days)
		at := first.AddDate(0, 0, day).Add(time.Duration(rng.IntN(86400)) * time.Second)
		keep := 1.0
		if day >= 365 {
			keep *= s.growth
		}
		if m := at.Month(); m >= time.June && m <= time.August {
			keep *= s.summer
		}
		if rng.Float64()*s.growth*s.summer > keep {
			continue
		}
		sin, cos := math.Sincos(s.angle * math.Pi / 180)
		u, v := s.long*rng.NormFloat64(), s.short*rng.NormFloat64()
		x = append(x, s.x+u*cos-v*sin)
		y = append(y, s.y+u*sin+v*cos)
		kind := "drift"
		if rng.Float64() < s.slips {
			kind = "slip"
		}
		category = append(category, kind)
		severity = append(severity, 1+int64(rng.IntN(3))+int64(rng.IntN(2)*rng.IntN(3)))
		when = append(when, at)
	}
	p := spatial.AutoPlane(centre.Lon, centre.Lat).Inverse(spatial.XYs{X: x, Y: y})
	for i := range p.Lon { // as a hand-held receiver writes them
		p.Lon[i], p.Lat[i] = math.Round(p.Lon[i]*1e6)/1e6, math.Round(p.Lat[i]*1e6)/1e6
	}
	for i := 0; i < 43; i++ { // faults, spread over the extract
		k := 17 + 929*i
		switch {
		case i < 12:
			p.Lon[k], p.Lat[k] = 0, 0
		case i < 37:
			p.Lat[k] = math.NaN()
		default:
			p.Lat[k] = 95.5
		}
	}
	return []parquetfile.Column{
		{Name: "time", Type: parquetfile.Timestamp, Ints: parquetfile.Microseconds(when)},
		{Name: "category", Type: parquetfile.Text, Texts: category},
		{Name: "severity", Type: parquetfile.Int64, Ints: severity},
		{Name: "lon", Type: parquetfile.Float64, Floats: p.Lon},
		{Name: "lat", Type: parquetfile.Float64, Floats: p.Lat},
	}
}

func pick(rng *rand.Rand) source {
	r := rng.Float64()
	for _, s := range sources {
		if r -= s.share; r < 0 {
			return s
		}
	}
	return sources[len(sources)-1]
}

// Nearest returns the named place nearest to a position and the distance in
// metres.
func Nearest(at spatial.LonLat) (name string, metres float64) {
	p := spatial.AutoPlane(centre.Lon, centre.Lat).Forward(spatial.LonLats{Lon: []float64{at.Lon}, Lat: []float64{at.Lat}})
	metres = math.Inf(1)
	for _, s := range sources {
		if d := math.Hypot(p.X[0]-s.x, p.Y[0]-s.y); s.place != "" && d < metres {
			name, metres = s.place, d
		}
	}
	return name, metres
}
