package report

import (
	"fmt"
	"image/color"
	"math"
)

// The ramp was made for this program. It is a path in OKLCH in which lightness
// is linear in t, so equal steps of the band's number look like equal steps
// and a grey print or an eye without one of its cone types keeps the order.
// Hue turns once from cold grey-blue through heather to the red-brown of peat,
// chroma rises and falls a little; where a colour lies outside sRGB its chroma
// is lowered, lightness and hue kept. On a dark page lightness rises instead,
// so that more always stands out more from the ground.

// ramp returns the colour of t in [0, 1], t = 1 for the highest intensity.
func ramp(t float64, dark bool) color.NRGBA {
	lightness := 0.93 - 0.62*t
	if dark {
		lightness = 0.36 + 0.56*t
	}
	hue := 225 + 165*t
	chroma := 0.028 + 0.112*math.Sin(math.Pi*(0.08+0.67*t))
	return oklch(lightness, chroma, hue)
}

// bandColour returns the colour of band i of n.
func bandColour(i, n int, dark bool) color.NRGBA {
	if n < 2 {
		return ramp(0.5, dark)
	}
	return ramp(float64(i)/float64(n-1), dark)
}

// oklch turns lightness (0 to 1), chroma and hue (degrees) into sRGB.
func oklch(l, c, hue float64) color.NRGBA {
	sin, cos := math.Sincos(hue * math.Pi / 180)
	lo, hi := 0.0, c
	r, g, b := linearRGB(l, c*cos, c*sin)
	if !inGamut(r, g, b) {
		for range 30 {
			mid := (lo + hi) / 2
			if inGamut(linearRGB(l, mid*cos, mid*sin)) {
				lo = mid
			} else {
				hi = mid
			}
		}
		r, g, b = linearRGB(l, lo*cos, lo*sin)
	}
	return color.NRGBA{encode8(r), encode8(g), encode8(b), 255}
}

func inGamut(r, g, b float64) bool {
	const slack = 1e-6
	return min(r, g, b) >= -slack && max(r, g, b) <= 1+slack
}

// linearRGB turns OKLab into linear sRGB, by Ottosson's published matrices.
func linearRGB(l, a, b float64) (red, green, blue float64) {
	x := l + 0.3963377774*a + 0.2158037573*b
	y := l - 0.1055613458*a - 0.0638541728*b
	z := l - 0.0894841775*a - 1.2914855480*b
	x, y, z = x*x*x, y*y*y, z*z*z
	return 4.0767416621*x - 3.3077115913*y + 0.2309699292*z,
		-1.2684380046*x + 2.6097574011*y - 0.3413193965*z,
		-0.0041960863*x - 0.7034186147*y + 1.7076147010*z
}

// encode8 is the sRGB transfer curve (IEC 61966-2-1) to 8 bits.
func encode8(v float64) uint8 {
	v = min(max(v, 0), 1)
	if v <= 0.0031308 {
		v *= 12.92
	} else {
		v = 1.055*math.Pow(v, 1/2.4) - 0.055
	}
	return uint8(math.Round(255 * v))
}

func hex(c color.NRGBA) string { return fmt.Sprintf("#%02x%02x%02x", c.R, c.G, c.B) }
