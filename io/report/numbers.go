package report

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"drumlin/spatial"
)

// nb keeps a number and its unit on one line.
const nb = "\u00a0"

// significant prints v with so many significant digits, without an exponent,
// thousands apart, with a true minus sign.
func significant(v float64, digits int) string {
	switch {
	case math.IsNaN(v):
		return "not known"
	case math.IsInf(v, 0):
		return "no limit"
	case v == 0:
		return "0"
	}
	r, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64)
	after := max(0, digits-1-int(math.Floor(math.Log10(math.Abs(r)))))
	return thousands(strconv.FormatFloat(r, 'f', after, 64))
}

// level prints a chosen number: up to three digits, no idle zeros.
func level(v float64) string { return withoutIdleZeros(significant(v, 3)) }

// level6 is level with six digits.
func level6(v float64) string { return withoutIdleZeros(significant(v, 6)) }

func withoutIdleZeros(s string) string {
	if strings.Contains(s, ".") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return s
}

// capital begins a word with a capital letter.
func capital(s string) string {
	r, n := utf8.DecodeRuneInString(s)
	return string(unicode.ToUpper(r)) + s[n:]
}

// thousands sets commas between groups of three whole digits.
func thousands(s string) string {
	neg := strings.HasPrefix(s, "-")
	s = strings.TrimPrefix(s, "-")
	whole, frac, dot := strings.Cut(s, ".")
	for i := len(whole) - 3; i > 0; i -= 3 {
		whole = whole[:i] + "," + whole[i:]
	}
	if dot {
		whole += "." + frac
	}
	if neg {
		whole = "−" + whole
	}
	return whole
}

func count(n float64) string { return thousands(strconv.FormatFloat(math.Round(n), 'f', 0, 64)) }

// areaText prints an area given in square kilometres.
func areaText(km2 float64) string {
	switch {
	case km2 >= 0.1 || km2 == 0:
		return significant(km2, 3) + nb + "km²"
	case km2 >= 0.001:
		return significant(km2*100, 3) + nb + "ha"
	}
	return significant(km2*1e6, 3) + nb + "m²"
}

// lengthText prints a length given in metres.
func lengthText(m float64) string {
	if m >= 1000 {
		return significant(m/1000, 3) + nb + "km"
	}
	return significant(m, 3) + nb + "m"
}

// areaUnit is the area that intensities are shown for.
type areaUnit struct {
	km2  float64
	name string
}

var areaUnits = []areaUnit{
	{1e-6, "m²"}, {0.01, "ha"}, {1, "km²"}, {100, "100 km²"}, {1000, "1,000 km²"}, {1e4, "10,000 km²"}, {1e5, "100,000 km²"}, {1e6, "million km²"},
}

// unitFor chooses the unit in which the highest intensity reads well: square
// kilometres where it lies between 1 and 100,000 in them.
func unitFor(highest float64) areaUnit {
	if highest >= 1e5 {
		if highest < 1e7 {
			return areaUnits[1]
		}
		return areaUnits[0]
	}
	for _, u := range areaUnits[2:] {
		if highest*u.km2 >= 1 {
			return u
		}
	}
	return areaUnits[len(areaUnits)-1]
}

// degreesText prints one coordinate, 7 to 0 decimals.
func degreesText(v float64, decimals int, positive, negative string) string {
	s := strconv.FormatFloat(math.Abs(v), 'f', decimals, 64)
	hemisphere := nb + positive
	if v < 0 {
		hemisphere = nb + negative
	}
	if f, _ := strconv.ParseFloat(s, 64); f == 0 {
		hemisphere = ""
	}
	return s + "°" + hemisphere
}

// placeText prints a position with as many decimals as the step of the lattice
// carries.
func placeText(at spatial.LonLat, placeless bool, step float64) string {
	if placeless {
		return "x " + significant(at.Lon, 6) + ", y " + significant(at.Lat, 6)
	}
	d := placeDecimals(step)
	return degreesText(at.Lat, d, "N", "S") + ", " + degreesText(at.Lon, d, "E", "W")
}

func placeDecimals(step float64) int {
	return min(max(int(math.Ceil(-math.Log10(step/111e3))), 2), 5)
}

// shareText prints a share as per cent.
func shareText(v float64) string { return strconv.FormatFloat(100*v, 'f', 1, 64) + nb + "%" }

// contentText names a region: 50 %, 99.9 %.
func contentText(c float64) string { return perCent(c) + nb + "%" }

func perCent(c float64) string {
	return strconv.FormatFloat(math.Round(c*1e8)/1e6, 'f', -1, 64)
}

// same is v as the bundle's GeoJSON files write it: 7 significant digits.
func same(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return ""
	}
	r, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 6, 64), 64)
	return strconv.FormatFloat(r+0, 'g', -1, 64)
}

func exact(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// data is a number on the page together with the file's own number.
func data(of, value, text string) template.HTML {
	return template.HTML(`<data value="` + html.EscapeString(value) + `" data-of="` + html.EscapeString(of) + `">` + html.EscapeString(text) + `</data>`)
}

// shown makes text from outside safe to look at: invalid bytes, control and
// format characters (those that turn the direction of text among them) appear
// by number instead of acting.
func shown(s string) string {
	if strings.IndexFunc(s, hidden) < 0 && utf8.ValidString(s) {
		return s
	}
	var b strings.Builder
	for _, r := range strings.ToValidUTF8(s, "\uFFFD") {
		if hidden(r) {
			fmt.Fprintf(&b, "⟨U+%04X⟩", r)
		} else {
			b.WriteRune(r)
		}
	}
	return b.String()
}

func hidden(r rune) bool {
	return unicode.In(r, unicode.Cc, unicode.Cf, unicode.Zl, unicode.Zp, unicode.Co)
}

// foreign is text from outside as markup: escaped, and isolated from the
// direction of what stands around it.
func foreign(s string) template.HTML {
	return template.HTML(`<bdi>` + html.EscapeString(shown(s)) + `</bdi>`)
}
