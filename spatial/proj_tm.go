package spatial

import "math"

// transverseMercator is the ellipsoidal transverse Mercator, EPSG method 9807,
// by Krueger's series to order 6 in the third flattening as in Karney (2011).
// Domain: within 90 degrees of the central meridian and transverse angle η' up
// to 0.9, which is 45 degrees from the meridian on the equator and more
// elsewhere; there the series is good to 1e-7 m or better.
type transverseMercator struct {
	crs  CRS
	ell  *Ellipsoid
	lon0 float64
	k    float64 // scale times rectifying radius
	fn   float64 // northing of the equator
}

const (
	tmEta     = 0.9
	tmTanhEta = 0.7162978701990245 // tanh 0.9
)

func newTM(c CRS, e *Ellipsoid) *transverseMercator {
	p := &transverseMercator{crs: c, ell: e, lon0: c.Lon0, k: c.K0 * e.rect}
	origin := p.Forward(LonLats{Lon: []float64{c.Lon0}, Lat: []float64{c.Lat0}})
	p.fn = c.FN - origin.Y[0]
	return p
}

func (p *transverseMercator) CRS() CRS        { return p.crs }
func (p *transverseMercator) EqualArea() bool { return false }

func (p *transverseMercator) Forward(g LonLats) XYs {
	lon, lat := g.Lon, g.Lat
	checkColumns(len(lon), len(lat))
	e, lon0, k, fe, fn := p.ell, p.lon0, p.k, p.crs.FE, p.fn
	for i, phi := range lat {
		d, ok := fromMeridian(lon[i], phi, lon0)
		if !ok || math.Abs(d) > math.Pi/2+1e-15 {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		sd, cd := math.Sincos(d)
		s, c := math.Sincos(phi * radians)
		// Sine and secant of the conformal latitude, both times cos φ: the
		// sphere's isometric latitude less delta, by the addition theorem.
		delta := e.isometricDifference(s)
		sh := delta * (1 + delta*delta*(1./6+delta*delta/120))
		ch := math.Sqrt(1 + sh*sh)
		a, b := s*ch-sh, ch-sh*s
		x, z := c*sd, c*cd
		if !(math.Abs(x) <= tmTanhEta*b) {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		r := 1 / (a*a + z*z)
		s2, c2 := 2*a*z*r, (z*z-a*a)*r   // sin 2ξ', cos 2ξ'
		sh2, ch2 := 2*x*b*r, (b*b+x*x)*r // sinh 2η', cosh 2η'
		re, im := krueger(&e.alpha, s2, c2, sh2, ch2)
		xi, eta := math.Atan2(a, z), math.Atanh(x/b)
		lon[i], lat[i] = fe+k*(eta+im), fn+k*(xi+re)
	}
	return XYs{X: lon, Y: lat}
}

func (p *transverseMercator) Inverse(g XYs) LonLats {
	xs, ys := g.X, g.Y
	checkColumns(len(xs), len(ys))
	e, lon0, fe, fn := p.ell, p.lon0, p.crs.FE, p.fn
	ik := 1 / p.k
	for i, y := range ys {
		eta, xi := (xs[i]-fe)*ik, (y-fn)*ik
		if !(math.Abs(eta) < tmEta+0.02 && math.Abs(xi) < math.Pi/2+0.02) {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		s, c := math.Sincos(xi)
		sh, ch := sinhcosh(eta)
		re, im := krueger(&e.betas, 2*s*c, c*c-s*s, 2*sh*ch, ch*ch+sh*sh)
		xi -= re
		eta -= im
		if math.Abs(xi) > math.Pi/2+1e-12 || math.Abs(eta) > tmEta+1e-12 {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		s, c = math.Sincos(xi)
		sh, _ = sinhcosh(eta)
		xs[i] = aroundMeridian(math.Atan2(sh, c), lon0)
		ys[i] = e.fromConformal(s, math.Sqrt(sh*sh+c*c)) * degrees
	}
	return LonLats{Lon: xs, Lat: ys}
}

// krueger sums Σ c_j sin 2j(ξ + iη), real and imaginary part, by Clenshaw's
// recurrence in complex numbers.
func krueger(k *[6]float64, s2, c2, sh2, ch2 float64) (re, im float64) {
	ar, ai := 2*c2*ch2, -2*s2*sh2 // 2 cos 2(ξ + iη)
	r6 := k[5]
	r5, i5 := k[4]+ar*r6, ai*r6
	r4, i4 := k[3]+ar*r5-ai*i5-r6, ar*i5+ai*r5
	r3, i3 := k[2]+ar*r4-ai*i4-r5, ar*i4+ai*r4-i5
	r2, i2 := k[1]+ar*r3-ai*i3-r4, ar*i3+ai*r3-i4
	r1, i1 := k[0]+ar*r2-ai*i2-r3, ar*i2+ai*r2-i3
	sr, si := s2*ch2, c2*sh2 // sin 2(ξ + iη)
	return sr*r1 - si*i1, sr*i1 + si*r1
}

// sinhcosh shares one exponential. The sine loses relative accuracy near 0 but
// no more than 1e-16 in absolute terms, a nanometre on the ground.
func sinhcosh(x float64) (sh, ch float64) {
	e := math.Exp(x)
	return (e - 1/e) / 2, (e + 1/e) / 2
}
