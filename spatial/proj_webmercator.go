package spatial

import "math"

// webMercator is EPSG method 1024, "popular visualisation pseudo-Mercator":
// the spherical Mercator applied to geographic latitudes of the ellipsoid. It
// is neither conformal nor equal-area; at 51.5 degrees a square metre on it is
// 0.39 of one on the ground. Domain: 85.06 degrees either side of the equator,
// the area of use of EPSG:3857, and eastings within one turn either side.
type webMercator struct {
	crs CRS
	a   float64
}

const webMercatorLat = 85.06

func (p *webMercator) CRS() CRS        { return p.crs }
func (p *webMercator) EqualArea() bool { return false }

func (p *webMercator) Forward(g LonLats) XYs {
	lon, lat := g.Lon, g.Lat
	checkColumns(len(lon), len(lat))
	lon0, a, fe, fn := p.crs.Lon0, p.a, p.crs.FE, p.crs.FN
	for i, phi := range lat {
		d, ok := fromMeridian(lon[i], phi, lon0)
		if !ok || math.Abs(phi) > webMercatorLat {
			lon[i], lat[i] = math.NaN(), math.NaN()
			continue
		}
		lon[i], lat[i] = fe+a*d, fn+a*math.Atanh(math.Sin(phi*radians))
	}
	return XYs{X: lon, Y: lat}
}

func (p *webMercator) Inverse(g XYs) LonLats {
	xs, ys := g.X, g.Y
	checkColumns(len(xs), len(ys))
	lon0, fe, fn := p.crs.Lon0, p.crs.FE, p.crs.FN
	ia := 1 / p.a
	top := math.Atanh(math.Sin(webMercatorLat*radians)) * (1 + 1e-12)
	for i, y := range ys {
		d, psi := (xs[i]-fe)*ia, (y-fn)*ia
		if !(math.Abs(d) <= 2*math.Pi && math.Abs(psi) <= top) {
			xs[i], ys[i] = math.NaN(), math.NaN()
			continue
		}
		xs[i] = lon0 + d*degrees
		ys[i] = math.Asin(math.Tanh(psi)) * degrees
	}
	return LonLats{Lon: xs, Lat: ys}
}
