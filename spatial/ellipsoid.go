package spatial

import (
	"fmt"
	"math"
)

// Ellipsoid is an ellipsoid of revolution with the series that the projections
// need, worked out once. It is immutable and safe to share. Lengths are metres.
//
// Sources: third flattening n, rectifying radius and the order-6 series of the
// transverse Mercator from Karney, "Transverse Mercator with an accuracy of a
// few nanometers" (2011), equations 14, 35 and 36; the series from conformal
// and from authalic latitude back to geographic latitude from Karney, "On
// auxiliary latitudes" (2022); q, authalic latitude and authalic radius from
// Snyder, "Map projections: a working manual" (1987), equations 3-11 to 3-13.
type Ellipsoid struct {
	name string
	a    float64 // semi-major axis
	f    float64 // flattening
	e2   float64 // squared eccentricity
	n    float64 // third flattening

	q        float64 // Snyder's q at the pole
	rq       float64 // radius of the sphere with the same area
	authSin  [8]float64
	authCos  [9]float64
	authBack [6]float64 // geographic latitude from authalic latitude, sin 2kβ

	isoDiff  [6]float64 // e atanh(e sin φ) in odd powers of sin φ
	confBack [6]float64 // geographic latitude from conformal latitude, sin 2kχ

	rect         float64 // rectifying radius
	alpha, betas [6]float64
}

// The ellipsoids known by name: EPSG 7030, 7019, 7001, 7008, 7022, 7004, 7024.
var ellipsoids = []*Ellipsoid{
	mustEllipsoid("WGS 84", 6378137, 298.257223563),
	mustEllipsoid("GRS 80", 6378137, 298.257222101),
	mustEllipsoid("Airy 1830", 6377563.396, 299.3249646),
	mustEllipsoid("Clarke 1866", 6378206.4, 294.978698213898),
	mustEllipsoid("International 1924", 6378388, 297),
	mustEllipsoid("Bessel 1841", 6377397.155, 299.1528128),
	mustEllipsoid("Krassowsky 1940", 6378245, 298.3),
}

// wgs84 is the ellipsoid of planes that the program chooses itself.
var wgs84 = ellipsoids[0]

// EllipsoidByName finds "WGS 84", "GRS 80", "Airy 1830", "Clarke 1866",
// "International 1924", "Bessel 1841" or "Krassowsky 1940".
func EllipsoidByName(name string) (*Ellipsoid, bool) {
	for _, e := range ellipsoids {
		if e.name == name {
			return e, true
		}
	}
	return nil, false
}

// NewEllipsoid makes an ellipsoid from its semi-major axis in metres and its
// inverse flattening; an inverse flattening of 0 means a sphere. Flattenings
// above 1/150 are refused: the series are cut for those of the Earth.
func NewEllipsoid(name string, a, invF float64) (*Ellipsoid, error) {
	if !(a > 0) || math.IsInf(a, 0) || !(invF == 0 || invF >= 150) || math.IsInf(invF, 0) {
		return nil, fmt.Errorf("spatial: ellipsoid %q: semi-major axis %g m and inverse flattening %g; "+
			"needs a positive axis and an inverse flattening of 0 (sphere) or at least 150", name, a, invF)
	}
	e := &Ellipsoid{name: name, a: a}
	if invF != 0 {
		e.f = 1 / invF
	}
	e.e2 = e.f * (2 - e.f)
	e.n = e.f / (2 - e.f)
	e.initAuthalic()
	e.initConformal()
	return e, nil
}

func mustEllipsoid(name string, a, invF float64) *Ellipsoid {
	e, err := NewEllipsoid(name, a, invF)
	if err != nil {
		panic(err)
	}
	return e
}

// Name returns the name, "WGS 84".
func (e *Ellipsoid) Name() string { return e.name }

// SemiMajor returns the semi-major axis a in metres.
func (e *Ellipsoid) SemiMajor() float64 { return e.a }

// Flattening returns f = (a-b)/a, 0 for a sphere.
func (e *Ellipsoid) Flattening() float64 { return e.f }

// Area returns the area of the whole surface in square metres.
func (e *Ellipsoid) Area() float64 { return 4 * math.Pi * e.rq * e.rq }

// AuthalicRadius returns the radius in metres of the sphere of the same area.
func (e *Ellipsoid) AuthalicRadius() float64 { return e.rq }

// MeridianQuadrant returns the distance from equator to pole in metres.
func (e *Ellipsoid) MeridianQuadrant() float64 { return e.rect * math.Pi / 2 }

// radii returns the radius of curvature along the meridian, M, and across it,
// N, at a latitude whose sine is s.
func (e *Ellipsoid) radii(s float64) (m, n float64) {
	w := 1 / (1 - e.e2*s*s)
	n = e.a * math.Sqrt(w)
	return n * (1 - e.e2) * w, n
}

// initAuthalic fills what authalic and fromAuthalic read.
//
// With s = sin φ, q = (1-e²) Σ (2k+2)/(2k+1) e^(2k) s^(2k+1), the power series
// of Snyder's 3-12. sin β = q/q(pole) = s P(s²). Because 1 - s²P(s²)² is 0 at
// s² = 1 it divides by 1 - s² = cos² φ, which gives cos β = cos φ √G(s²): no
// accuracy is lost towards the poles, where 1 - sin² β would cancel.
func (e *Ellipsoid) initAuthalic() {
	pow := 1.0
	for k := range e.authSin {
		e.authSin[k] = pow * float64(2*k+2) / float64(2*k+1)
		pow *= e.e2
	}
	var top float64
	for k := len(e.authSin) - 1; k >= 0; k-- {
		top += e.authSin[k]
	}
	for k := range e.authSin {
		e.authSin[k] /= top
	}
	e.q = (1 - e.e2) * top
	e.rq = e.a * math.Sqrt(e.q/2)

	var square [16]float64 // coefficients of u P(u)²
	for i, x := range e.authSin {
		for j, y := range e.authSin {
			square[i+j+1] += x * y
		}
	}
	var tail float64
	for k := len(square) - 1; k > 0; k-- {
		tail += square[k]
		if k-1 < len(e.authCos) {
			e.authCos[k-1] = tail
		}
	}

	e.authBack = [6]float64{
		poly(e.n, 0, 4./3, 4./45, -16./35, -2582./14175, 60136./467775, 28112932./212837625),
		poly(e.n, 0, 0, 46./45, 152./945, -11966./14175, -21016./51975, 251310128./638512875),
		poly(e.n, 0, 0, 0, 3044./2835, 3802./14175, -94388./66825, -8797648./10945935),
		poly(e.n, 0, 0, 0, 0, 6059./4725, 41072./93555, -1472637812./638512875),
		poly(e.n, 0, 0, 0, 0, 0, 768272./467775, 455935736./638512875),
		poly(e.n, 0, 0, 0, 0, 0, 0, 4210684958./1915538625),
	}
}

// initConformal fills the isometric and transverse Mercator series.
func (e *Ellipsoid) initConformal() {
	pow := e.e2
	for k := range e.isoDiff {
		e.isoDiff[k] = pow / float64(2*k+1)
		pow *= e.e2
	}
	n := e.n
	e.confBack = [6]float64{
		poly(n, 0, 2, -2./3, -2, 116./45, 26./45, -2854./675),
		poly(n, 0, 0, 7./3, -8./5, -227./45, 2704./315, 2323./945),
		poly(n, 0, 0, 0, 56./15, -136./35, -1262./105, 73814./2835),
		poly(n, 0, 0, 0, 0, 4279./630, -332./35, -399572./14175),
		poly(n, 0, 0, 0, 0, 0, 4174./315, -144838./6237),
		poly(n, 0, 0, 0, 0, 0, 0, 601676./22275),
	}
	e.rect = e.a / (1 + n) * poly(n*n, 1, 1./4, 1./64, 1./256)
	e.alpha = [6]float64{
		poly(n, 0, 1./2, -2./3, 5./16, 41./180, -127./288, 7891./37800),
		poly(n, 0, 0, 13./48, -3./5, 557./1440, 281./630, -1983433./1935360),
		poly(n, 0, 0, 0, 61./240, -103./140, 15061./26880, 167603./181440),
		poly(n, 0, 0, 0, 0, 49561./161280, -179./168, 6601661./7257600),
		poly(n, 0, 0, 0, 0, 0, 34729./80640, -3418889./1995840),
		poly(n, 0, 0, 0, 0, 0, 0, 212378941./319334400),
	}
	e.betas = [6]float64{
		poly(n, 0, 1./2, -2./3, 37./96, -1./360, -81./512, 96199./604800),
		poly(n, 0, 0, 1./48, 1./15, -437./1440, 46./105, -1118711./3870720),
		poly(n, 0, 0, 0, 17./480, -37./840, -209./4480, 5569./90720),
		poly(n, 0, 0, 0, 0, 4397./161280, -11./504, -830251./7257600),
		poly(n, 0, 0, 0, 0, 0, 4583./161280, -108847./3991680),
		poly(n, 0, 0, 0, 0, 0, 0, 20648693./638668800),
	}
}

// authalic turns sine and cosine of a geographic latitude into those of the
// authalic latitude.
func (e *Ellipsoid) authalic(s, c float64) (sb, cb float64) {
	u := s * s
	p, g := &e.authSin, &e.authCos
	sb = s * (p[0] + u*(p[1]+u*(p[2]+u*(p[3]+u*(p[4]+u*(p[5]+u*(p[6]+u*p[7])))))))
	cb = c * math.Sqrt(g[0]+u*(g[1]+u*(g[2]+u*(g[3]+u*(g[4]+u*(g[5]+u*(g[6]+u*(g[7]+u*g[8]))))))))
	return sb, cb
}

// fromAuthalic returns the geographic latitude in radians of an authalic
// latitude given by any two numbers in the ratio of its sine and cosine.
func (e *Ellipsoid) fromAuthalic(sb, cb float64) float64 {
	return auxiliaryBack(&e.authBack, sb, cb)
}

// fromConformal is fromAuthalic for the conformal latitude.
func (e *Ellipsoid) fromConformal(sc, cc float64) float64 {
	return auxiliaryBack(&e.confBack, sc, cc)
}

// isometricDifference returns e atanh(e s): by how much the isometric latitude
// of the ellipsoid is less than that of the sphere, at a latitude of sine s.
func (e *Ellipsoid) isometricDifference(s float64) float64 {
	u := s * s
	d := &e.isoDiff
	return s * (d[0] + u*(d[1]+u*(d[2]+u*(d[3]+u*(d[4]+u*d[5])))))
}

// auxiliaryBack sums θ + Σ c_k sin 2kθ for the angle θ whose sine and cosine
// are in the ratio s : c, by Clenshaw's recurrence.
func auxiliaryBack(k *[6]float64, s, c float64) float64 {
	r := 1 / (s*s + c*c)
	s2 := 2 * s * c * r
	t := 2 * (c*c - s*s) * r // 2 cos 2θ
	b6 := k[5]
	b5 := k[4] + t*b6
	b4 := k[3] + t*b5 - b6
	b3 := k[2] + t*b4 - b5
	b2 := k[1] + t*b3 - b4
	b1 := k[0] + t*b2 - b3
	return math.Atan2(s, c) + s2*b1
}

// poly evaluates c[0] + c[1] x + c[2] x² + ...
func poly(x float64, c ...float64) float64 {
	var y float64
	for i := len(c) - 1; i >= 0; i-- {
		y = y*x + c[i]
	}
	return y
}
