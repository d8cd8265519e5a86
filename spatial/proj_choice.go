package spatial

import (
	"fmt"
	"math"
	"strconv"
)

// AutoPlane returns the plane the program chooses itself: Lambert azimuthal
// equal-area on WGS 84, without false origin, centred on the given position
// rounded to whole degrees (a latitude beyond a pole becomes the pole, NaN
// becomes 0). Longitudes coming back lie within 180 degrees of the centre.
func AutoPlane(lon0, lat0 float64) Projection {
	lon0, lat0 = wholeLongitude(lon0), max(-90, min(90, whole(lat0)))
	return newLAEA(CRS{
		Name:      "Lambert azimuthal equal-area, centre " + hemisphere(lon0, "E", "W") + " " + hemisphere(lat0, "N", "S") + ", WGS 84",
		Method:    "LAEA",
		Ellipsoid: wgs84.name,
		Lon0:      lon0,
		Lat0:      lat0,
	}, wgs84)
}

// hemisphere writes whole degrees: 178E, 21S, 0N.
func hemisphere(v float64, positive, negative string) string {
	if v < 0 {
		return strconv.Itoa(int(-v)) + negative
	}
	return strconv.Itoa(int(v)) + positive
}

// whole rounds to whole degrees, halves upwards, NaN and infinities to 0.
func whole(v float64) float64 {
	if !(math.Abs(v) < 1e9) {
		return 0
	}
	return math.Floor(v+0.5) + 0 // + 0 turns -0 into 0
}

// wholeLongitude rounds to whole degrees in (-180, 180].
func wholeLongitude(lon float64) float64 {
	lon = math.Remainder(whole(lon), 360) + 0
	if lon == -180 {
		return 180
	}
	return lon
}

// widestBounds is the span in degrees up to which the middle of the bounds
// alone is a good enough centre: areas stay true wherever the centre is, and
// 20 degrees off it angles are bent by less than 2 degrees.
const widestBounds = 20

// ChooseCentre proposes the centre of a plane from the bounds of the events:
// the middle, in whole degrees, when both spans are 20 degrees or less. Wider
// or senseless bounds give ok = false: the bounds may be those of a few strays,
// or of events on both sides of the antimeridian, and CentreCounter must look
// at the events. lonMin may be as low as -180 and lonMax as high as 360.
func ChooseCentre(lonMin, lonMax, latMin, latMax float64) (centre LonLat, ok bool) {
	dLon, dLat := lonMax-lonMin, latMax-latMin
	if !(dLon >= 0 && dLon <= widestBounds && dLat >= 0 && dLat <= widestBounds &&
		latMin >= -90 && latMax <= 90 && lonMin >= -180 && lonMax <= 360) {
		return LonLat{}, false
	}
	return LonLat{Lon: wholeLongitude(lonMin + dLon/2), Lat: whole(latMin + dLat/2)}, true
}

// CentreCounter finds the centre of events in one pass: it counts them by
// whole degrees of longitude and of latitude. Counts are integers, so neither
// the order of the events nor their split over counters changes the centre.
// The zero value is ready; it is not safe for concurrent use (give each worker
// its own and Merge). 4.3 kB whatever the number of events.
type CentreCounter struct {
	lon [360]int64 // [k]: events nearest to longitude k-180
	lat [181]int64 // [k]: events nearest to latitude k-90
	n   int64
}

// Add counts positions. Those that are not on the globe are left out. It does
// not change or keep p.
func (c *CentreCounter) Add(p LonLats) {
	checkColumns(len(p.Lon), len(p.Lat))
	for i, lon := range p.Lon {
		lat := p.Lat[i]
		if !(lat >= -90 && lat <= 90 && lon >= -540 && lon <= 540) {
			continue
		}
		c.lon[(int(math.Floor(lon+0.5))+900)%360]++
		c.lat[int(math.Floor(lat+0.5))+90]++
		c.n++
	}
}

// Merge adds what another counter saw.
func (c *CentreCounter) Merge(o *CentreCounter) {
	for k, v := range o.lon {
		c.lon[k] += v
	}
	for k, v := range o.lat {
		c.lat[k] += v
	}
	c.n += o.n
}

// Count returns the number of events counted.
func (c *CentreCounter) Count() int64 { return c.n }

// Centre returns the centre in whole degrees: the circular median of the
// longitudes (the whole degree from which the sum of distances along the
// circle to all events is least, Mardia and Jupp, "Directional statistics",
// 2000, section 2.2.2) and the median of the latitudes. Half of the events may
// be strays before either can leave the rest. It needs no seam, so events
// about the antimeridian are like any others. Where several degrees tie, the
// middle of the longest run of them counts, the western one of two middles,
// and of equal runs the one that begins first going east from 180W. ok is
// false when no event was counted.
func (c *CentreCounter) Centre() (centre LonLat, ok bool) {
	if c.n == 0 {
		return LonLat{}, false
	}
	var cost [360]int64
	least := int64(math.MaxInt64)
	for k := range cost {
		var sum int64
		for j, v := range c.lon {
			if v != 0 {
				d := (j - k + 360) % 360
				sum += v * int64(min(d, 360-d))
			}
		}
		cost[k] = sum
		least = min(least, sum)
	}
	first, longest := 0, 0
	for k := range cost {
		if cost[k] != least || cost[(k+359)%360] == least {
			continue // not the beginning of a run
		}
		n := 1
		for n < 360 && cost[(k+n)%360] == least {
			n++
		}
		if n > longest {
			first, longest = k, n
		}
	}
	if longest == 0 { // all 360 tie: Greenwich is as good as any
		first, longest = 180, 1
	}
	return LonLat{
		Lon: wholeLongitude(float64(first + (longest-1)/2 - 180)),
		Lat: whole(float64(c.latRank((c.n-1)/2)+c.latRank(c.n/2)) / 2),
	}, true
}

// latRank returns the latitude, in whole degrees, of the event of that rank.
func (c *CentreCounter) latRank(rank int64) int {
	for k, v := range c.lat {
		if rank -= v; rank < 0 {
			return k - 90
		}
	}
	return 90
}

// Distort says what a projection does to shapes at one place.
type Distort struct {
	MaxScale  float64 // length on the plane over length on the ground, in the direction where it is most
	MinScale  float64 // the same where it is least
	Angular   float64 // most by which an angle is changed, degrees
	AreaScale float64 // area on the plane over area on the ground
}

// String is one line for a person or a record.
func (d Distort) String() string {
	return fmt.Sprintf("scale %.6f to %.6f, angles up to %.3f degrees, areas times %.6f", d.MinScale, d.MaxScale, d.Angular, d.AreaScale)
}

// Distortion measures what p does at a place: the axes of Tissot's indicatrix
// (Snyder 1987, pages 20-24) from derivatives by fourth-order differences,
// good to about 1e-10. Poles are taken 0.02 degrees off. A plane without a
// place distorts nothing; outside the domain all four numbers are NaN.
func Distortion(p Projection, at LonLat) Distort {
	c := p.CRS()
	if c.Method == "plane" {
		return Distort{MaxScale: 1, MinScale: 1, AreaScale: 1}
	}
	e, ok := EllipsoidByName(c.Ellipsoid)
	if !ok {
		e = wgs84
	}
	const h = 0.005 // degrees
	lat := max(-90+4*h, min(90-4*h, at.Lat))
	g := LonLats{
		Lon: []float64{at.Lon - 2*h, at.Lon - h, at.Lon + h, at.Lon + 2*h, at.Lon, at.Lon, at.Lon, at.Lon},
		Lat: []float64{lat, lat, lat, lat, lat - 2*h, lat - h, lat + h, lat + 2*h},
	}
	q := p.Forward(g)
	slope := func(v []float64) float64 { return (v[0] - v[3] + 8*(v[2]-v[1])) / (12 * h * radians) }
	s, k := math.Sincos(lat * radians)
	m, n := e.radii(s)
	xe, ye := slope(q.X[:4])/(n*k), slope(q.Y[:4])/(n*k) // per metre east
	xn, yn := slope(q.X[4:])/m, slope(q.Y[4:])/m         // per metre north
	area := math.Abs(xe*yn - xn*ye)
	sum := xe*xe + ye*ye + xn*xn + yn*yn // a² + b² of the indicatrix
	plus, minus := math.Sqrt(sum+2*area), math.Sqrt(max(0, sum-2*area))
	return Distort{
		MaxScale:  (plus + minus) / 2,
		MinScale:  (plus - minus) / 2,
		Angular:   2 * math.Asin(minus/plus) * degrees,
		AreaScale: area,
	}
}
