package spatial

import "math"

// lambertConic is the Lambert conformal conic of the ellipsoid with one or two
// standard parallels, EPSG methods 9801 and 9802 (IOGP Guidance Note 7-2;
// Snyder 1987, pages 107-109). Snyder's t is exp(-ψ), ψ the isometric latitude.
// Domain: everything but the pole that the cone opens towards.
type lambertConic struct {
	crs  CRS
	ell  *Ellipsoid
	lon0 float64
	n    float64 // cone constant
	k    float64 // a F, with the scale of the one-parallel form
	rho0 float64
}

func newLCC(c CRS, e *Ellipsoid) *lambertConic {
	s1, k1 := sincosDegrees(c.Lat1)
	s2, k2 := sincosDegrees(c.Lat2)
	m1, m2 := k1/math.Sqrt(1-e.e2*s1*s1), k2/math.Sqrt(1-e.e2*s2*s2)
	psi1, psi2 := e.isometric(s1, k1), e.isometric(s2, k2)
	p := &lambertConic{crs: c, ell: e, lon0: c.Lon0, n: s1}
	if math.Abs(c.Lat1-c.Lat2) > 1e-10 {
		p.n = math.Log(m1/m2) / (psi2 - psi1)
	}
	p.k = e.a * m1 / p.n * math.Exp(p.n*psi1)
	if c.K0 != 0 {
		p.k *= c.K0
	}
	switch {
	case math.Abs(c.Lat0) < 90:
		p.rho0 = p.k * math.Exp(-p.n*e.isometric(sincosDegrees(c.Lat0)))
	case c.Lat0*p.n < 0:
		p.rho0 = math.NaN()
	}
	return p
}

func (p *lambertConic) CRS() CRS        { return p.crs }
func (p *lambertConic) EqualArea() bool { return false }

// isometric returns the isometric latitude of a latitude short of the poles.
func (e *Ellipsoid) isometric(s, c float64) float64 {
	psi := math.Log((1 + math.Abs(s)) / c)
	return math.Copysign(psi, s) - e.isometricDifference(s)
}

func (p *lambertConic) Forward(g LonLats) XYs {
	lon, lat := g.Lon, g.Lat
	checkColumns(len(lon), len(lat))
	e, lon0, n, k, fe, fn := p.ell, p.lon0, p.n, p.k, p.crs.FE, p.crs.FN+p.rho0
	for i, phi := range lat {
		d, ok := fromMeridian(lon[i], phi, lon0)
		if !ok || phi*n <= -90*math.Abs(n) {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		var rho float64 // 0 at the apex
		if math.Abs(phi) < 90 {
			rho = k * math.Exp(-n*e.isometric(math.Sincos(phi*radians)))
		}
		sd, cd := math.Sincos(n * d)
		lon[i], lat[i] = fe+rho*sd, fn-rho*cd
	}
	return XYs{X: lon, Y: lat}
}

// seam is how far, in metres, a position may lie off the cut of a cone, or of
// its apex, and still be taken as on it: several roundings of a coordinate.
const seam = 1e-7

// offCone is the distance from the cut of a cone that a longitude d beyond ±π
// lies off it, at the squared distance r2 from the apex.
func offCone(d, n, r2 float64) float64 {
	return (math.Abs(d) - math.Pi) * math.Abs(n) * math.Sqrt(r2)
}

func (p *lambertConic) Inverse(g XYs) LonLats {
	xs, ys := g.X, g.Y
	checkColumns(len(xs), len(ys))
	e, lon0, n, fe, fn := p.ell, p.lon0, p.n, p.crs.FE, p.crs.FN+p.rho0
	ik, in, sign := 1/math.Abs(p.k), 1/n, math.Copysign(1, n)
	for i, y := range ys {
		x, y := sign*(xs[i]-fe)*ik, sign*(fn-y)*ik
		r2 := x*x + y*y
		d := math.Atan2(x, y) * in
		if !(r2 <= math.MaxFloat64 && (math.Abs(d) <= math.Pi || offCone(d, n, r2) < seam*ik)) {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		t := math.Exp(in * math.Log(r2)) // exp(-2ψ): 0 at the north pole
		xs[i] = aroundMeridian(d, lon0)
		// tan χ = sinh ψ, so sine and cosine are as (1-t) to 2√t.
		if t > 1 {
			t = 1 / t
			ys[i] = -e.fromConformal(1-t, 2*math.Sqrt(t)) * degrees
		} else {
			ys[i] = e.fromConformal(1-t, 2*math.Sqrt(t)) * degrees
		}
	}
	return LonLats{Lon: xs, Lat: ys}
}
