package spatial

import "math"

// crossX places the vertices on the horizontal edge right of framed node
// (i, j), left to right: out gets their positions along it, in (0, 1).
func (s *Isolines) crossX(i, j int, a, b uint8, out []float64) {
	switch i {
	case 0:
		s.crossFrame(a, b, out, true)
		return
	case s.nx:
		s.crossFrame(a, b, out, false)
		return
	}
	v := s.g.Values[(j-1)*s.nx:]
	p := i - 1
	f := [4]float64{math.NaN(), v[p], v[p+1], math.NaN()}
	if p > 0 {
		f[0] = v[p-1]
	}
	if p+2 < s.nx {
		f[3] = v[p+2]
	}
	s.cross(f, a, b, out)
}

// crossY does the same for the vertical edge above framed node (i, j).
func (s *Isolines) crossY(i, j int, a, b uint8, out []float64) {
	switch j {
	case 0:
		s.crossFrame(a, b, out, true)
		return
	case s.ny:
		s.crossFrame(a, b, out, false)
		return
	}
	v := s.g.Values
	p := (j-1)*s.nx + i - 1
	f := [4]float64{math.NaN(), v[p], v[p+s.nx], math.NaN()}
	if j > 1 {
		f[0] = v[p-s.nx]
	}
	if j+1 < s.ny {
		f[3] = v[p+2*s.nx]
	}
	s.cross(f, a, b, out)
}

// crossFrame spaces the levels evenly across the frame, the highest nearest
// the lattice.
func (s *Isolines) crossFrame(a, b uint8, out []float64, rising bool) {
	n := float64(len(s.levels) + 1)
	for m := range out {
		if rising {
			out[m] = float64(int(a)+m+1) / n
		} else {
			out[m] = float64(len(s.levels)-(int(a)-1-m)) / n
		}
	}
}

// cross places the vertices on an edge between f[1] and f[2], whose neighbours
// in line are f[0] and f[3] (NaN where there is none).
func (s *Isolines) cross(f [4]float64, a, b uint8, out []float64) {
	rise := edgeCurve(f, s.opt.Linear)
	for m := range out {
		k := int(a) + m
		if a > b {
			k = int(a) - 1 - m
		}
		if rise.log {
			out[m] = rise.solve(s.logs[k])
		} else {
			out[m] = (s.levels[k] - f[1]) / (f[2] - f[1])
		}
	}
	spread(out, s.opt.Clamp)
}

// spread moves rising positions apart so that they keep the distance gap from
// 0, from 1 and from each other.
func spread(t []float64, gap float64) {
	gap = min(gap, 1/float64(2*(len(t)+1)))
	least := 0.0
	for m := range t {
		least += gap
		if !(t[m] >= least) {
			t[m] = least
		}
		least = t[m]
	}
	most := 1.0
	for m := len(t) - 1; m >= 0; m-- {
		most -= gap
		if t[m] > most {
			t[m] = most
		}
		most = t[m]
	}
}

// cubic is a rising or falling polynomial in the position along an edge, of
// the logarithm of the function; log is false where only the linear rule holds.
type cubic struct {
	a0, a1, a2, a3 float64
	end            float64 // value at 1
	log            bool
}

// edgeCurve returns the cubic through the logarithms of four values in line if
// it is monotone between the middle two, else the straight line between them.
// It depends on the edge alone, so levels keep their order.
func edgeCurve(f [4]float64, linear bool) cubic {
	if linear || !(f[1] > 0) || !(f[2] > 0) {
		return cubic{}
	}
	g0, g1 := math.Log(f[1]), math.Log(f[2])
	d := g1 - g0
	if d == 0 {
		return cubic{}
	}
	c := cubic{a0: g0, a1: d, end: g1, log: true}
	before, beyond := f[0] > 0, f[3] > 0
	var gm, gp float64
	if before {
		gm = math.Log(f[0])
	}
	if beyond {
		gp = math.Log(f[3])
	}
	switch {
	case before && !beyond:
		gp = 3*g1 - 3*g0 + gm // no third difference
	case beyond && !before:
		gm = 3*g0 - 3*g1 + gp
	case !before:
		return c
	}
	a3 := (gp - 3*g1 + 3*g0 - gm) / 6
	a2 := (g1+gm)/2 - g0
	a1 := d - a2 - a3
	if monotone(a1, a2, a3, d) {
		c.a1, c.a2, c.a3 = a1, a2, a3
	}
	return c
}

// monotone reports whether a1 + 2 a2 t + 3 a3 t² keeps the sign of d on [0, 1].
func monotone(a1, a2, a3, d float64) bool {
	if d < 0 {
		a1, a2, a3 = -a1, -a2, -a3
	}
	if !(a1 > 0) || !(a1+2*a2+3*a3 > 0) {
		return false
	}
	if t := -a2 / (3 * a3); t > 0 && t < 1 {
		return a1+a2*t > 0 // the slope at its own turning point
	}
	return true
}

// solve returns where the cubic takes the value v, by Newton steps inside a
// shrinking bracket.
func (c cubic) solve(v float64) float64 {
	lo, hi := 0.0, 1.0
	up := c.end > c.a0
	t := min(max((v-c.a0)/(c.end-c.a0), 0), 1)
	for range 40 {
		e := c.a0 + t*(c.a1+t*(c.a2+t*c.a3)) - v
		if e == 0 {
			break
		}
		if (e > 0) == up {
			hi = t
		} else {
			lo = t
		}
		slope := c.a1 + t*(2*c.a2+3*t*c.a3)
		to := t - e/slope
		if !(to > lo && to < hi) {
			to = (lo + hi) / 2
		}
		if math.Abs(to-t) < 1e-13 {
			return to
		}
		t = to
	}
	return t
}
