package spatial

import "math"

// albers is the Albers equal-area conic of the ellipsoid, EPSG method 9822
// (IOGP Guidance Note 7-2; Snyder 1987, pages 101-102), written with the sine
// of the authalic latitude, sin β = q/q(pole), in place of q.
type albers struct {
	crs  CRS
	ell  *Ellipsoid
	lon0 float64
	n    float64 // cone constant
	c    float64 // Snyder's C over q at the pole
	k    float64 // a √q(pole) / n
	rho0 float64
}

func newAlbers(c CRS, e *Ellipsoid) *albers {
	s1, k1 := sincosDegrees(c.Lat1)
	s2, k2 := sincosDegrees(c.Lat2)
	b1, _ := e.authalic(s1, k1)
	b2, _ := e.authalic(s2, k2)
	m1, m2 := k1*k1/(1-e.e2*s1*s1), k2*k2/(1-e.e2*s2*s2) // squares of Snyder's m
	p := &albers{crs: c, ell: e, lon0: c.Lon0, n: s1}
	if math.Abs(c.Lat1-c.Lat2) > 1e-10 {
		p.n = (m1 - m2) / (e.q * (b2 - b1))
	}
	p.c = m1/e.q + p.n*b1
	p.k = e.a * math.Sqrt(e.q) / p.n
	b0, _ := e.authalic(sincosDegrees(c.Lat0))
	p.rho0 = p.k * math.Sqrt(max(0, p.c-p.n*b0))
	return p
}

func (p *albers) CRS() CRS        { return p.crs }
func (p *albers) EqualArea() bool { return true }

func (p *albers) Forward(g LonLats) XYs {
	lon, lat := g.Lon, g.Lat
	checkColumns(len(lon), len(lat))
	e, lon0, n, c, k, fe, fn := p.ell, p.lon0, p.n, p.c, p.k, p.crs.FE, p.crs.FN+p.rho0
	for i, phi := range lat {
		d, ok := fromMeridian(lon[i], phi, lon0)
		if !ok {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		sb, _ := e.authalic(math.Sincos(phi * radians))
		rho := k * math.Sqrt(c-n*sb) // NaN where the cone ends
		sd, cd := math.Sincos(n * d)
		x, y := fe+rho*sd, fn-rho*cd
		if x != x {
			y = x
		}
		lon[i], lat[i] = x, y
	}
	return XYs{X: lon, Y: lat}
}

func (p *albers) Inverse(g XYs) LonLats {
	xs, ys := g.X, g.Y
	checkColumns(len(xs), len(ys))
	e, lon0, n, c, fe, fn := p.ell, p.lon0, p.n, p.c, p.crs.FE, p.crs.FN+p.rho0
	ik, in, sign := 1/(p.k*p.k), 1/n, math.Copysign(1, n)
	for i, y := range ys {
		x, y := sign*(xs[i]-fe), sign*(fn-y)
		r2 := x*x + y*y
		sb := (c - r2*ik) * in
		d := math.Atan2(x, y) * in
		if !(math.Abs(sb) <= 1+1e-13 && (math.Abs(d) <= math.Pi || offCone(d, n, r2) < seam)) {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		sb = min(1, max(-1, sb))
		xs[i] = aroundMeridian(d, lon0)
		ys[i] = e.fromAuthalic(sb, math.Sqrt((1-sb)*(1+sb))) * degrees
	}
	return LonLats{Lon: xs, Lat: ys}
}
