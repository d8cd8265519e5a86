package spatial

// LonLat is a position in degrees, longitude first.
type LonLat struct{ Lon, Lat float64 }

// XY is a position on a plane, in metres: X east, Y north.
type XY struct{ X, Y float64 }

// LonLats are positions in degrees as two columns of equal length.
type LonLats struct{ Lon, Lat []float64 }

// XYs are positions on a plane in metres as two columns of equal length.
type XYs struct{ X, Y []float64 }

// Projection takes degrees to metres on a plane and back. Implementations are
// immutable and safe for concurrent use.
type Projection interface {
	// CRS says which plane it is.
	CRS() CRS
	// Forward turns degrees into metres IN PLACE: the returned columns are the
	// memory of p. A position outside the projection's domain becomes NaN, NaN.
	Forward(p LonLats) XYs
	// Inverse turns metres into degrees in place, longitudes continuous around
	// the projection's central meridian (they may pass 180 or -180, so a ring
	// across the antimeridian stays in one piece). Outside the domain: NaN, NaN.
	Inverse(p XYs) LonLats
	// EqualArea reports whether areas on the plane are areas on the ellipsoid.
	EqualArea() bool
}

// CRS identifies a plane well enough for a file to carry it.
type CRS struct {
	ID        string  // "EPSG:3035", or "" for a plane without a code
	Name      string  // for people: "Lambert azimuthal equal-area, centre 178E 21S, WGS 84"
	Method    string  // "LAEA", "TM", "LCC", "AEA", "WebMercator", "geographic", "plane"
	Ellipsoid string  // "WGS 84", "GRS 80", ...
	Lat0      float64 // latitude of origin, degrees
	Lon0      float64 // longitude of origin, degrees
	Lat1      float64 // first standard parallel, degrees (LCC, AEA)
	Lat2      float64 // second standard parallel, degrees (LCC, AEA)
	K0        float64 // scale on the central meridian (TM), else 0
	FE, FN    float64 // false easting and northing, metres
}
