package report

import (
	"math"
	"strings"
	"testing"

	"drumlin/spatial"
)

// Lightness is monotone, in even steps, on light and dark pages, and so it is
// for eyes without long- or middle-wave cones (linear-light matrices of Viénot,
// Brettel and Mollon 1999).
func TestRampOrder(t *testing.T) {
	protan := [9]float64{0.11238, 0.88762, 0, 0.11238, 0.88762, 0, 0.00401, -0.00401, 1}
	deutan := [9]float64{0.29275, 0.70725, 0, 0.29275, 0.70725, 0, -0.02234, 0.02234, 1}
	for _, dark := range []bool{false, true} {
		for _, eye := range []struct {
			name string
			m    *[9]float64
		}{{"all cones", nil}, {"no long-wave cones", &protan}, {"no middle-wave cones", &deutan}} {
			const n = 30
			var least, most float64 = math.Inf(1), 0
			last := 0.0
			for i := range n {
				l := lightness(bandColour(i, n, dark).R, bandColour(i, n, dark).G, bandColour(i, n, dark).B, eye.m)
				if i > 0 {
					d := l - last
					if !dark {
						d = -d
					}
					least, most = min(least, d), max(most, d)
				}
				last = l
			}
			// 8-bit colours leave steps uneven by some tenths of 1/30 of the range
			if least < 0.006 {
				t.Errorf("dark %t, %s: least step of lightness %.4f", dark, eye.name, least)
			}
			if eye.m == nil && most > 1.25*least {
				t.Errorf("dark %t: steps of lightness from %.4f to %.4f", dark, least, most)
			}
		}
	}
}

// lightness is OKLab's L of an sRGB colour as an eye sees it.
func lightness(r, g, b uint8, eye *[9]float64) float64 {
	lin := func(v uint8) float64 {
		x := float64(v) / 255
		if x <= 0.04045 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	x, y, z := lin(r), lin(g), lin(b)
	if eye != nil {
		x, y, z = eye[0]*x+eye[1]*y+eye[2]*z, eye[3]*x+eye[4]*y+eye[5]*z, eye[6]*x+eye[7]*y+eye[8]*z
	}
	l := math.Cbrt(0.4122214708*x + 0.5363325363*y + 0.0514459929*z)
	m := math.Cbrt(0.2119034982*x + 0.6806995451*y + 0.1073969566*z)
	s := math.Cbrt(0.0883024619*x + 0.2817188376*y + 0.6299787005*z)
	return 0.2104542553*l + 0.7936177850*m - 0.0040720468*s
}

func square(x, y, half float64, hole bool) spatial.Ring {
	r := spatial.Ring{{X: x - half, Y: y - half}, {X: x + half, Y: y - half}, {X: x + half, Y: y + half}, {X: x - half, Y: y + half}}
	if hole {
		r[1], r[3] = r[3], r[1]
	}
	return r
}

// Borders that two bands share cancel, whatever their direction.
func TestAbove(t *testing.T) {
	bands := []spatial.Band{
		{Plane: spatial.MultiPolygon{{square(0, 0, 9, false), square(0, 0, 6, true), square(-7.5, 0, 1, true)}}},
		{Plane: spatial.MultiPolygon{{square(0, 0, 6, false), square(0, 0, 3, true)}}},
		{Plane: spatial.MultiPolygon{{square(0, 0, 3, false)}}},
	}
	out := above(bands)
	for k, want := range []int{2, 1, 1} { // the lowest keeps its hole that nothing fills
		if len(out[k]) != want {
			t.Errorf("band %d: %d rings, want %d", k, len(out[k]), want)
		}
	}
}

// A thinned ring lies within a unit and a half of each vertex it had.
func TestThin(t *testing.T) {
	f := newFrame(spatial.XY{X: -1e4, Y: -1e4}, spatial.XY{X: 1e4, Y: 1e4}, 960, 400, 880)
	var r spatial.Ring
	for i := range 5000 {
		s, c := math.Sincos(2 * math.Pi * float64(i) / 5000)
		q := 8000 + 300*math.Sin(float64(i)/40)
		r = append(r, spatial.XY{X: q * c, Y: q * s})
	}
	thin := f.ring(r)
	if len(thin) > 1500 || len(thin) < 50 {
		t.Errorf("%d of 5,000 vertices kept", len(thin))
	}
	for _, p := range r {
		x, y := f.at(p)
		least := math.Inf(1)
		for i, a := range thin {
			b := thin[(i+1)%len(thin)]
			dx, dy := float64(b.x-a.x), float64(b.y-a.y)
			u := min(max(((x-float64(a.x))*dx+(y-float64(a.y))*dy)/(dx*dx+dy*dy), 0), 1)
			least = min(least, math.Hypot(x-float64(a.x)-u*dx, y-float64(a.y)-u*dy))
		}
		if least > 1.0+math.Sqrt2/2 {
			t.Fatalf("a vertex lies %.2f units off", least)
		}
	}
	if small := f.ring(square(0, 0, 0.01, false)); len(small) != 4 {
		t.Errorf("a tiny part became %v", small)
	}
}

func TestPath(t *testing.T) {
	got := string(pathData(nil, [][]point{{{5, -6}, {7, -6}, {4, -9}}}, true))
	if want := "M5-6l2 0-3-3z"; got != want {
		t.Errorf("path %q, want %q", got, want)
	}
}

func TestNumbers(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{significant(0.003194549, 3), "0.00319"}, {significant(306123, 3), "306,000"}, {significant(-0.0995, 2), "−0.10"}, {significant(0, 3), "0"}, {significant(999.6, 3), "1,000"},
		{areaText(0.0123), "1.23 ha"}, {areaText(0.00012), "120 m²"}, {areaText(1630000), "1,630,000 km²"}, {lengthText(78792), "78.8 km"}, {lengthText(43.21), "43.2 m"},
		{level(0.88), "0.88"}, {level(100), "100"}, {level(1.40), "1.4"}, {contentText(0.999), "99.9 %"},
		{degreesText(-17.9312, 2, "N", "S"), "17.93° S"}, {degreesText(-0.0001, 2, "N", "S"), "0.00°"},
		{unitFor(0.0032).name, "1,000 km²"}, {unitFor(57).name, "km²"}, {unitFor(3e5).name, "ha"}, {unitFor(3e9).name, "m²"}, {unitFor(1e-9).name, "million km²"},
		{factorText(0.5), "H/2"}, {factorText(2), "2 H"}, {factorText(1), "H"}, {gridLabel(190, 5, true, false), "170° W"}, {gridLabel(180, 5, true, false), "180°"}, {gridLabel(0.25, 0.05, false, false), "0.25° N"},
		{shown("a\u202eb\x00"), "a⟨U+202E⟩b⟨U+0000⟩"},
	} {
		if strings.ReplaceAll(c.got, nb, " ") != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}

// The script's reading between the coarse grid of positions, done here, agrees
// with the projection to a third of a pixel.
func TestPlaceGrid(t *testing.T) {
	proj := spatial.AutoPlane(-94, 39)
	f := newFrame(spatial.XY{X: -3e6, Y: -3e6}, spatial.XY{X: 3e6, Y: 3e6}, 960, 400, 880)
	q := spatial.XYs{}
	for j := range placeNodes {
		for i := range placeNodes {
			p := f.back(float64(f.w)*float64(i)/(placeNodes-1), float64(f.h)*float64(j)/(placeNodes-1))
			q.X, q.Y = append(q.X, p.X), append(q.Y, p.Y)
		}
	}
	g := proj.Inverse(q)
	worst := 0.0
	for k := range 400 {
		x, y := float64(f.w)*math.Mod(0.618*float64(k), 1), float64(f.h)*math.Mod(0.7549*float64(k), 1)
		wi, wj := parabola(x/float64(f.w)*(placeNodes-1)), parabola(y/float64(f.h)*(placeNodes-1))
		var lon, lat float64
		for b := range 3 {
			for a := range 3 {
				n := (wj.i+b-1)*placeNodes + wi.i + a - 1
				lon, lat = lon+wi.w[a]*wj.w[b]*g.Lon[n], lat+wi.w[a]*wj.w[b]*g.Lat[n]
			}
		}
		back := proj.Forward(spatial.LonLats{Lon: []float64{lon}, Lat: []float64{lat}})
		u, v := f.at(spatial.XY{X: back.X[0], Y: back.Y[0]})
		worst = max(worst, math.Hypot(u-x, v-y)/perPixel)
	}
	if worst > 1.0/3 {
		t.Errorf("off by %.2f pixels", worst)
	}
}

type weights struct {
	i int
	w [3]float64
}

func parabola(v float64) weights {
	i := min(max(int(math.Round(v)), 1), placeNodes-2)
	d := v - float64(i)
	return weights{i, [3]float64{d * (d - 1) / 2, 1 - d*d, d * (d + 1) / 2}}
}
