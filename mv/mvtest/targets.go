package mvtest

import (
	"fmt"
	"math"

	"drumlin/mv"
)

type part struct {
	w      float64
	mean   []float64
	v1, v2 float64 // variances
	rho    float64 // correlation
}

// plane2 builds a bivariate mixture.
func plane2(parts ...part) *mv.NormalMixture {
	var w []float64
	var means, covs [][]float64
	for _, p := range parts {
		c := p.rho * math.Sqrt(p.v1*p.v2)
		w, means, covs = append(w, p.w), append(means, p.mean), append(covs, []float64{p.v1, c, c, p.v2})
	}
	return must(mv.NewNormalMixture(w, means, covs))
}

func at(v ...float64) []float64 { return v }

// turned returns Rot(deg) diag(a^2, b^2) Rot(deg)', counter-clockwise.
func turned(a, b, deg float64) []float64 {
	s, c := math.Sincos(deg * math.Pi / 180)
	x, y := a*a, b*b
	return []float64{c*c*x + s*s*y, c * s * (x - y), c * s * (x - y), s*s*x + c*c*y}
}

// Targets lists the names Target knows.
func Targets() []string {
	return []string{"A", "B", "C", "D", "E", "F", "G", "H", "I", "J", "K", "L", "S1", "S2", "S3", "RING", "T1", "T2", "T3"}
}

// Target returns a test density: A to L, S1, S2, S3 and RING in the plane, T1
// to T3 in space. It panics for another name.
func Target(name string) *mv.NormalMixture {
	const f, g, q = 4.0 / 9, 9.0 / 25, 49.0 / 100
	switch name {
	case "A":
		return plane2(part{1, at(0, 0), 0.25, 1, 0})
	case "B":
		return plane2(part{1, at(0, 0), 1, 1, 0.7})
	case "C":
		return plane2(part{0.2, at(0, 0), 1, 1, 0}, part{0.2, at(0.5, 0.5), f, f, 0},
			part{0.6, at(13.0/12, 13.0/12), 25.0 / 81, 25.0 / 81, 0})
	case "D":
		return plane2(part{2.0 / 3, at(0, 0), 1, 4, 0.5}, part{1.0 / 3, at(0, 0), f, 1.0 / 9, -0.5})
	case "E":
		return plane2(part{0.5, at(-1, 0), f, f, 0}, part{0.5, at(1, 0), f, f, 0})
	case "F":
		return plane2(part{0.5, at(-1.5, 0), 1.0 / 16, 1, 0}, part{0.5, at(1.5, 0), 1.0 / 16, 1, 0})
	case "G":
		return plane2(part{0.5, at(-1, 1), f, f, 0.6}, part{0.5, at(1, -1), f, f, 0.6})
	case "H":
		return plane2(part{0.5, at(1, -1), f, f, 0.7}, part{0.5, at(-1, 1), f, f, 0})
	case "I":
		return plane2(part{0.45, at(-1.2, 1.2), g, g, 0.3}, part{0.45, at(1.2, -1.2), g, g, -0.6},
			part{0.1, at(0, 0), 1.0 / 16, 1.0 / 16, 0.2})
	case "J":
		return plane2(part{1, at(-1.2, 0), g, g, 0.7}, part{1, at(1.2, 0), g, g, 0.7}, part{1, at(0, 0), g, g, -0.7})
	case "K":
		y := 2 * math.Sqrt(3) / 3
		return plane2(part{3, at(-1, 0), g, q, 0.6}, part{3, at(1, y), g, q, 0}, part{1, at(1, -y), g, q, 0})
	case "L":
		return plane2(part{1, at(-1, 1), f, f, 0.4}, part{3, at(-1, -1), f, f, 0.6},
			part{1, at(1, -1), f, f, -0.7}, part{3, at(1, 1), f, f, -0.5})
	case "S1":
		c := turned(2, 0.25, 45)
		return must(mv.NewNormalMixture([]float64{1, 1}, [][]float64{{-0.6, 0.6}, {0.6, -0.6}}, [][]float64{c, c}))
	case "S2":
		return must(mv.NewNormalMixture([]float64{0.55, 0.25, 0.20}, [][]float64{{0, 0}, {3, 1}, {-2, 2}},
			[][]float64{turned(2.5, 1.5, 20), turned(0.3, 0.15, 20), {0.04, 0, 0, 0.04}}))
	case "S3":
		const v = 1.0 / 16
		return plane2(part{0.5, at(0, 0), 1, 1, 0}, part{0.1, at(0, 0), v, v, 0}, part{0.1, at(1, 1), v, v, 0},
			part{0.1, at(1, -1), v, v, 0}, part{0.1, at(-1, 1), v, v, 0}, part{0.1, at(-1, -1), v, v, 0})
	case "RING":
		var parts []part
		for k := range 12 {
			s, c := math.Sincos(float64(k) * math.Pi / 6)
			parts = append(parts, part{1, at(2*c, 2*s), 0.16, 0.16, 0})
		}
		return plane2(parts...)
	case "T1":
		return must(mv.NewNormalMixture([]float64{1}, [][]float64{{0, 0, 0}}, [][]float64{{1, 0, 0, 0, 1, 0, 0, 0, 1}}))
	case "T2":
		return must(mv.NewNormalMixture([]float64{1}, [][]float64{{0, 0, 0}}, [][]float64{{1, .5, .3, .5, 1, .4, .3, .4, 1}}))
	case "T3":
		return must(mv.NewNormalMixture([]float64{1, 1}, [][]float64{{-1, -1, 0}, {1, 1, 0.5}},
			[][]float64{{.5, .2, 0, .2, .4, .1, 0, .1, .3}, {.3, -.1, .05, -.1, .5, 0, .05, 0, .6}}))
	}
	panic("mvtest: no target named " + name)
}

// Univariate returns the univariate target of number 1 to 15.
func Univariate(number int) *mv.NormalMixture {
	var w []float64
	var means, covs [][]float64
	add := func(weight, mean, sd float64) {
		w, means, covs = append(w, weight), append(means, at(mean)), append(covs, at(sd*sd))
	}
	switch number {
	case 1:
		add(1, 0, 1)
	case 2:
		add(0.2, 0, 1)
		add(0.2, 0.5, 2.0/3)
		add(0.6, 13.0/12, 5.0/9)
	case 3:
		for l := range 8 {
			p := math.Pow(2.0/3, float64(l))
			add(1, 3*(p-1), p)
		}
	case 4:
		add(2, 0, 1)
		add(1, 0, 0.1)
	case 5:
		add(0.1, 0, 1)
		add(0.9, 0, 0.1)
	case 6:
		add(1, -1, 2.0/3)
		add(1, 1, 2.0/3)
	case 7:
		add(1, -1.5, 0.5)
		add(1, 1.5, 0.5)
	case 8:
		add(0.75, 0, 1)
		add(0.25, 1.5, 1.0/3)
	case 9:
		add(0.45, -1.2, 0.6)
		add(0.45, 1.2, 0.6)
		add(0.1, 0, 0.25)
	case 10:
		add(0.5, 0, 1)
		for l := range 5 {
			add(0.1, float64(l)/2-1, 0.1)
		}
	case 11:
		add(0.49, -1, 2.0/3)
		add(0.49, 1, 2.0/3)
		for l := range 7 {
			add(1.0/350, float64(l-3)/2, 0.01)
		}
	case 12:
		add(0.5, 0, 1)
		for l := -2; l <= 2; l++ {
			add(math.Pow(2, float64(1-l))/31, float64(l)+0.5, math.Pow(2, float64(-l))/10)
		}
	case 13:
		add(0.46, -1, 2.0/3)
		add(0.46, 1, 2.0/3)
		for l := 1; l <= 3; l++ {
			add(1.0/300, -float64(l)/2, 0.01)
			add(7.0/300, float64(l)/2, 0.07)
		}
	case 14:
		for l := range 6 {
			p := math.Pow(2, float64(-l))
			add(32*p/63, (65-96*p)/21, 32.0/63*p)
		}
	case 15:
		for l := range 3 {
			add(2.0/7, float64(12*l-15)/7, 2.0/7)
		}
		for l := 8; l <= 10; l++ {
			add(1.0/21, 2*float64(l)/7, 1.0/21)
		}
	default:
		panic(fmt.Sprintf("mvtest: no univariate target %d; there are 1 to 15", number))
	}
	return must(mv.NewNormalMixture(w, means, covs))
}
