package spatial

import "math"

// laea is the Lambert azimuthal equal-area projection of the ellipsoid, EPSG
// method 9820 (IOGP Guidance Note 7-2; Snyder 1987, pages 187-190). One set of
// formulas serves the oblique, the equatorial and both polar aspects, because
// the ratio d is computed without dividing by the cosine of the centre.
// Domain: everything but 320 m around the antipode of the centre.
type laea struct {
	crs    CRS
	ell    *Ellipsoid
	lon0   float64
	s0, c0 float64 // sine and cosine of the centre's authalic latitude
	kx, ky float64 // Rq·D and Rq/D
}

func newLAEA(c CRS, e *Ellipsoid) *laea {
	s, k := sincosDegrees(c.Lat0)
	u := s * s
	g := poly(u, e.authCos[:]...) // (cos β / cos φ)² at the centre
	d := e.a / (math.Sqrt((1-e.e2*u)*g) * e.rq)
	p := &laea{crs: c, ell: e, lon0: c.Lon0, kx: e.rq * d, ky: e.rq / d}
	p.s0, p.c0 = e.authalic(s, k)
	return p
}

func (p *laea) CRS() CRS        { return p.crs }
func (p *laea) EqualArea() bool { return true }

// antipodeSine2 is the squared sine of the angle to the antipode within which
// the direction from the centre is no longer kept: 5e-5 rad, 320 m.
const antipodeSine2 = 2.5e-9

func (p *laea) Forward(g LonLats) XYs {
	lon, lat := g.Lon, g.Lat
	checkColumns(len(lon), len(lat))
	e, lon0, s0, c0, kx, ky, fe, fn := p.ell, p.lon0, p.s0, p.c0, p.kx, p.ky, p.crs.FE, p.crs.FN
	for i, phi := range lat {
		d, ok := fromMeridian(lon[i], phi, lon0)
		if !ok {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		sd, cd := math.Sincos(d)
		sb, cb := e.authalic(math.Sincos(phi * radians))
		x, z := cb*sd, cb*cd
		y := c0*sb - s0*z
		cosC := s0*sb + c0*z
		var k float64
		if cosC > -0.5 {
			k = math.Sqrt(2 / (1 + cosC))
		} else { // the other half of the same identity, where 1 + cos c cancels
			h := x*x + y*y
			if h < antipodeSine2 {
				lon[i], lat[i] = math.NaN(), math.NaN()
				continue
			}
			k = math.Sqrt(2 * (1 - cosC) / h)
		}
		lon[i], lat[i] = fe+kx*k*x, fn+ky*k*y
	}
	return XYs{X: lon, Y: lat}
}

func (p *laea) Inverse(g XYs) LonLats {
	xs, ys := g.X, g.Y
	checkColumns(len(xs), len(ys))
	e, lon0, s0, c0, fe, fn := p.ell, p.lon0, p.s0, p.c0, p.crs.FE, p.crs.FN
	ix, iy := 1/p.kx, 1/p.ky
	for i, y := range ys {
		u, v := (xs[i]-fe)*ix, (y-fn)*iy
		t := (u*u + v*v) / 4 // sin² of half the angle from the centre
		if !(t <= 1) {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		w := math.Sqrt(1 - t)
		cosC := 1 - 2*t
		u *= w
		v *= w
		z := cosC*c0 - v*s0
		sb := cosC*s0 + v*c0
		xs[i] = aroundMeridian(math.Atan2(u, z), lon0)
		ys[i] = e.fromAuthalic(sb, math.Sqrt(u*u+z*z)) * degrees
	}
	return LonLats{Lon: xs, Lat: ys}
}
