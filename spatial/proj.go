package spatial

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Kinds of error about coordinate reference systems, for errors.Is.
var (
	// ErrCRSUnsupported: a system that is known by name but needs something
	// not built in: a datum shift, another projection method, another unit.
	ErrCRSUnsupported = errors.New("coordinate reference system not supported")
	// ErrCRSUnknown: a code or text that stands in no table here.
	ErrCRSUnknown = errors.New("coordinate reference system not known")
)

const (
	radians = math.Pi / 180
	degrees = 180 / math.Pi
)

// CRSRef is what a text like "EPSG:3035" refers to. Exactly one of these
// holds: Geographic (degrees; Projection is nil), Plane (metres without a
// place; Projection changes nothing), or a Projection with a code.
type CRSRef struct {
	Geographic bool
	Plane      bool
	Projection Projection
	CRS        CRS
}

// ParseCRS reads "EPSG:n" (any case), "OGC:CRS84", the URN and URL forms of
// both, and "plane". The axis order is always longitude before latitude and
// easting before northing, whatever the registry says of a code, because that
// is the order in which files keep columns called x and y.
func ParseCRS(s string) (CRSRef, error) {
	t := strings.ToUpper(strings.TrimSpace(s))
	if t == "PLANE" {
		return CRSRef{Plane: true, Projection: plane{}, CRS: planeCRS}, nil
	}
	var authority, code string
	if rest, ok := strings.CutPrefix(t, "URN:OGC:DEF:CRS:"); ok {
		authority, code = ends(rest, ":")
	} else if _, rest, ok := strings.Cut(t, "://WWW.OPENGIS.NET/DEF/CRS/"); ok {
		authority, code = ends(rest, "/")
	} else {
		authority, code, _ = strings.Cut(t, ":")
	}
	switch {
	case authority == "OGC" && code == "CRS84", t == "CRS84":
		c, err := LookupCRS(4326)
		c.CRS.ID = "OGC:CRS84"
		return c, err
	case authority == "EPSG":
		if n, err := strconv.Atoi(strings.TrimSpace(code)); err == nil {
			return LookupCRS(n)
		}
	}
	return CRSRef{}, fmt.Errorf("spatial: %w: %q; write EPSG:n, OGC:CRS84 or plane; %s", ErrCRSUnknown, s, familiesKnown)
}

// ends returns what stands before the first and after the last separator.
func ends(s, sep string) (first, last string) {
	first, rest, _ := strings.Cut(s, sep)
	return first, rest[strings.LastIndex(rest, sep)+1:]
}

// LookupCRS finds a system by its EPSG code.
//
// WGS 84, ETRS89, NAD83, GDA94, GDA2020, SIRGAS 2000, NZGD2000, JGD2011, Korea
// 2000 and CGCS2000 are taken as one datum: they differ by up to 2 m (by the
// drift of plates since each was fixed), less than the position of an event is
// known to. Systems on older datums lie 50 m to 500 m off and are refused by
// name with ErrCRSUnsupported; so are known systems in feet or of a method not
// built in. Any other code is ErrCRSUnknown.
func LookupCRS(epsg int) (CRSRef, error) {
	c, ok := registered(epsg)
	if !ok {
		for _, r := range refusals {
			if epsg >= r.from && epsg <= r.to {
				return CRSRef{}, fmt.Errorf("spatial: %w: EPSG:%d (%s) needs %s, which is not built in; convert the coordinates to EPSG:4326 first",
					ErrCRSUnsupported, epsg, r.name, r.needs)
			}
		}
		return CRSRef{}, fmt.Errorf("spatial: %w: EPSG:%d; %s; or convert the coordinates to EPSG:4326 first", ErrCRSUnknown, epsg, familiesKnown)
	}
	c.ID = "EPSG:" + strconv.Itoa(epsg)
	if c.Method == "geographic" {
		return CRSRef{Geographic: true, CRS: c}, nil
	}
	p, err := NewProjection(c)
	if err != nil {
		return CRSRef{}, err
	}
	return CRSRef{Projection: p, CRS: p.CRS()}, nil
}

// NewProjection builds the projection that c describes, so that a CRS read
// back from a record gives the plane it was written from. Method is "LAEA",
// "TM", "LCC", "AEA", "WebMercator" or "plane"; Ellipsoid a name that
// EllipsoidByName knows. A Lambert conformal conic with one standard parallel
// has Lat1 = Lat2 (and K0 when it is not 1).
func NewProjection(c CRS) (Projection, error) {
	if c.Method == "plane" {
		return plane{}, nil
	}
	e, ok := EllipsoidByName(c.Ellipsoid)
	if !ok {
		return nil, fmt.Errorf("spatial: %w: ellipsoid %q is not built in", ErrCRSUnsupported, c.Ellipsoid)
	}
	return newProjectionOn(c, e)
}

func newProjectionOn(c CRS, e *Ellipsoid) (Projection, error) {
	for _, v := range [...]struct {
		name  string
		value float64
		top   float64
	}{
		{"latitude of origin", c.Lat0, 90}, {"longitude of origin", c.Lon0, 540},
		{"first standard parallel", c.Lat1, 90}, {"second standard parallel", c.Lat2, 90},
		{"false easting", c.FE, 1e9}, {"false northing", c.FN, 1e9}, {"scale", c.K0, 10},
	} {
		if !(math.Abs(v.value) <= v.top) {
			return nil, fmt.Errorf("spatial: projection %s: %s %g is not a number between %g and %g",
				c.Method, v.name, v.value, -v.top, v.top)
		}
	}
	if c.Lon0 = math.Remainder(c.Lon0, 360); c.Lon0 == -180 {
		c.Lon0 = 180
	}
	conic := c.Method == "LCC" || c.Method == "AEA"
	switch {
	case conic && !(math.Abs(c.Lat1) < 90 && math.Abs(c.Lat2) < 90 && math.Abs(c.Lat1+c.Lat2) > 0.01):
		return nil, fmt.Errorf("spatial: projection %s: standard parallels %g and %g make no cone", c.Method, c.Lat1, c.Lat2)
	case c.Method == "TM" && !(c.K0 > 0), c.Method == "LCC" && c.K0 < 0:
		return nil, fmt.Errorf("spatial: projection %s: scale %g is not positive", c.Method, c.K0)
	}
	switch c.Method {
	case "LAEA":
		return newLAEA(c, e), nil
	case "TM":
		return newTM(c, e), nil
	case "AEA":
		return newAlbers(c, e), nil
	case "LCC":
		p := newLCC(c, e)
		if math.IsNaN(p.rho0) {
			return nil, fmt.Errorf("spatial: projection LCC: latitude of origin %g is not on the cone", c.Lat0)
		}
		return p, nil
	case "WebMercator":
		return &webMercator{crs: c, a: e.a}, nil
	}
	return nil, fmt.Errorf("spatial: %w: projection method %q is not built in", ErrCRSUnsupported, c.Method)
}

// unequalColumns is the panic of a Forward or Inverse given two columns of
// different length.
const unequalColumns = "spatial: coordinate columns of unequal length"

func checkColumns(a, b int) {
	if a != b {
		panic(unequalColumns)
	}
}

// fromMeridian returns the longitude relative to lon0 in radians, between -π
// and π, and whether the position is on the globe at all. Longitudes up to a
// turn and a half off are taken, so -180..180 and 0..360 both work.
func fromMeridian(lon, lat, lon0 float64) (float64, bool) {
	if !(lat >= -90 && lat <= 90 && lon >= -540 && lon <= 540) {
		return 0, false
	}
	d := lon - lon0
	if d > 180 || d < -180 {
		d = math.Remainder(d, 360)
	}
	return d * radians, true
}

// aroundMeridian is the way back: degrees in (lon0-180, lon0+180].
func aroundMeridian(d, lon0 float64) float64 {
	d *= degrees
	if d <= -180 || d > 180 {
		d = 180
	}
	return lon0 + d
}

// sincosDegrees is exact at the poles, so that parameters given there are.
func sincosDegrees(lat float64) (s, c float64) {
	switch lat {
	case 90:
		return 1, 0
	case -90:
		return -1, 0
	}
	return math.Sincos(lat * radians)
}
