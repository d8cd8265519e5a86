package report

import (
	"fmt"
	"html"
	"html/template"
	"math"
	"strconv"

	"drumlin/spatial"
)

// markup collects SVG. Numbers are formatted here and text is escaped here, so
// that nothing else needs to be.
type markup struct{ b []byte }

func (m *markup) raw(s string) { m.b = append(m.b, s...) }

func (m *markup) f(format string, a ...any) { m.b = fmt.Appendf(m.b, format, a...) }

func (m *markup) text(s string) { m.raw(html.EscapeString(shown(s))) }

func (m *markup) path(class string, rings [][]point, closed bool, attributes string) {
	m.raw(`<path class="` + class + `"` + attributes + ` d="`)
	m.b = pathData(m.b, rings, closed)
	m.raw("\"/>\n")
}

func (m *markup) html() template.HTML { return template.HTML(m.b) }

// mapSVG is the main map. Below the frame a strip holds the scale bar, north
// and the kernel.
func mapSVG(p *Page, s *scene, u areaUnit) template.HTML {
	m := &markup{}
	w, h := s.f.w, s.f.h
	strip := stripHeight(s)
	step := min(p.Release.Surface().Step[0], p.Release.Surface().Step[1])
	m.f(`<svg id="map" viewBox="0 0 %d %d" role="group" aria-label="Map: bands of intensity, regions and numbered peaks; the tables below hold the same numbers" data-w="%d" data-h="%d" data-n="%d" data-digits="%d" data-places="%s"`,
		w, h+strip, w, h, placeNodes, placeDecimals(step), placeGrid(&s.f, p.Projection, step))
	if p.placeless() {
		m.raw(` data-placeless="1"`)
	}
	m.f(">\n<defs><clipPath id=\"inside\"><rect width=\"%d\" height=\"%d\"/></clipPath></defs>\n", w, h)
	m.f("<g aria-hidden=\"true\" clip-path=\"url(#inside)\">\n<rect class=\"ground\" width=\"%d\" height=\"%d\"/>\n", w, h)
	m.raw("<g class=\"l-bands\" id=\"bands\">\n")
	for i, rings := range s.bands {
		m.path("b"+strconv.Itoa(i), rings, true, ` data-text="`+html.EscapeString(bandText(p, i, u))+`"`)
	}
	m.raw("</g>\n")
	if len(s.context) > 0 {
		m.raw("<defs>")
		m.path("plain", s.context, false, ` id="context"`)
		m.raw("</defs>\n<g class=\"l-context\"><use class=\"context edge\" href=\"#context\"/><use class=\"context\" href=\"#context\"/></g>\n")
	}
	m.graticule(s)
	if len(s.study) > 0 {
		m.raw("<g class=\"l-study\">")
		m.path("study", s.study, true, "")
		m.raw("</g>\n")
	}
	m.regions(s.regions, len(p.Release.Regions()))
	if s.spread.on {
		m.raw("<g class=\"l-spread\">")
		m.ellipse(s.spread)
		m.raw("</g>\n")
	}
	m.raw("</g>\n")
	m.peaks(p, s, u)
	m.f("<rect class=\"frame\" width=\"%d\" height=\"%d\" aria-hidden=\"true\"/>\n", w, h)
	m.strip(s)
	m.raw(`<g id="cross" class="off" aria-hidden="true"><path class="halo" d="M-60 0H60M0-60V60"/><path d="M-60 0H60M0-60V60"/></g>` + "\n</svg>")
	return m.html()
}

// bandText is what the map reads out for a band.
func bandText(p *Page, i int, u areaUnit) string {
	b := p.Release.Bands()[i]
	from := level(b.FromPerKM2 * u.km2)
	if math.IsInf(b.ToPerKM2, 0) {
		return "more than " + from + " " + p.counted() + " per " + u.name
	}
	return from + " to " + level(b.ToPerKM2*u.km2) + " " + p.counted() + " per " + u.name
}

func (m *markup) graticule(s *scene) {
	m.raw("<g class=\"l-grid\">\n")
	for _, l := range s.grid {
		m.path("grid", l.runs, false, "")
	}
	for _, l := range s.grid {
		if l.label == "" {
			continue
		}
		m.f(`<text class="gridtext" x="%d" y="%d" text-anchor="%s">`, l.at.x, l.at.y, [...]string{"start", "middle", "end"}[l.side])
		m.text(l.label)
		m.raw("</text>\n")
	}
	m.raw("</g>\n")
}

// regions draws each border over a pale halo, so that it shows on every colour.
func (m *markup) regions(shapes []regionShape, n int) {
	m.raw("<g class=\"l-regions\" id=\"regions\">\n")
	for i, r := range shapes {
		m.path("halo", r.rings, true, "")
		m.path("region r"+strconv.Itoa(min(n-1-i, 3)), r.rings, true, ` data-text="`+contentText(r.content)+` region"`)
	}
	m.raw("</g>\n")
}

func (m *markup) peaks(p *Page, s *scene, u areaUnit) {
	m.raw("<g class=\"l-peaks\">\n")
	for _, q := range s.dots {
		m.f("<circle class=\"dot\" cx=\"%d\" cy=\"%d\" r=\"10\" aria-hidden=\"true\"/>\n", q.x, q.y)
	}
	peaks := p.Release.Peaks()
	for i := len(s.marks) - 1; i >= 0; i-- { // the highest on top, last in the order of the keyboard too
		k, class := s.marks[i], "mark"
		if k.rank > 8 {
			class += " low"
		}
		if k.at != k.label {
			m.f("<path class=\"leader %s\" d=\"M%d %dL%d %d\" aria-hidden=\"true\"/>\n", class, k.at.x, k.at.y, k.label.x, k.label.y)
			m.f("<circle class=\"dot\" cx=\"%d\" cy=\"%d\" r=\"10\" aria-hidden=\"true\"/>\n", k.at.x, k.at.y)
		}
		m.f(`<a class="%s" href="#peak-%d" aria-label="Peak %d, %s %s per %s"><circle class="disc" cx="%d" cy="%d" r="%d"/><text class="rank" x="%d" y="%d">%d</text></a>`+"\n",
			class, k.rank, k.rank, significant(peaks[i].IntensityPerKM2*u.km2, 3), html.EscapeString(p.counted()), html.EscapeString(u.name),
			k.label.x, k.label.y, markRadius, k.label.x, k.label.y, k.rank)
	}
	m.raw("</g>\n")
}

func (m *markup) ellipse(e ellipse) {
	m.f("<ellipse class=\"spread\" rx=\"%.1f\" ry=\"%.1f\" transform=\"translate(%d %d) rotate(%.2f)\"/>\n", e.minor, e.major, e.at.x, e.at.y, e.bearing)
}

// stripHeight makes room for the ellipse.
func stripHeight(s *scene) int {
	h := 60 * perPixel
	if _, half := extent(s.spread); !s.spread.on {
		h = max(h, int(2*half)+6*perPixel*2)
	}
	return h
}

// extent returns half the width and height of an ellipse.
func extent(e ellipse) (x, y float64) {
	sin, cos := math.Sincos(e.bearing * math.Pi / 180)
	return math.Hypot(e.major*sin, e.minor*cos), math.Hypot(e.major*cos, e.minor*sin)
}

// strip draws the scale bar, north and the kernel's ellipse below the map.
func (m *markup) strip(s *scene) {
	mid := s.f.h + stripHeight(s)/2
	x, y := 24, s.f.h+44
	m.f("<g class=\"strip\" aria-hidden=\"true\">\n<path class=\"barline\" d=\"M%d %dv24h%dv-24M%d %dv-24\"/><path class=\"barfill\" d=\"M%d %dh%dv-12h%dz\"/>\n",
		x, y, s.bar.units, x+s.bar.units/2, y+24, x, y+24, s.bar.units/2, -s.bar.units/2)
	m.f(`<text class="striptext" x="%d" y="%d">0</text>`, x, y+86)
	m.f(`<text class="striptext mid half" x="%d" y="%d">%s</text>`, x+s.bar.units/2, y+86, html.EscapeString(s.bar.half))
	m.f(`<text class="striptext mid" x="%d" y="%d">%s</text>`+"\n", x+s.bar.units, y+86, html.EscapeString(s.bar.text))
	if s.hasNorth {
		m.f(`<g transform="translate(%d %d) rotate(%.1f)"><path class="north" d="M0-84L28 20 0 0-28 20z"/></g><text class="striptext" x="%d" y="%d">N</text>`+"\n",
			s.f.w/2-40, mid+10, s.north, s.f.w/2+10, mid+10)
	}
	if !s.spread.on {
		e := s.spread
		half, _ := extent(e)
		e.at = point{s.f.w - 40 - int(half), mid}
		m.raw("<g class=\"l-spread\">")
		m.ellipse(e)
		m.f(`<text class="striptext end" x="%d" y="%d">one event’s</text><text class="striptext end" x="%d" y="%d">spread (1 scale)</text></g>`+"\n",
			e.at.x-int(half)-40, mid-24, e.at.x-int(half)-40, mid+50)
	}
	m.raw("</g>\n")
}

// smallSVG draws regions alone, for several maps side by side.
func smallSVG(f frame, regions []spatial.Region, study spatial.MultiPolygon, label string) template.HTML {
	m := &markup{}
	m.f(`<svg viewBox="0 0 %d %d" role="img" aria-label="%s"><rect class="ground" width="%d" height="%d"/>`+"\n", f.w, f.h, html.EscapeString(label), f.w, f.h)
	shapes := regionShapes(&f, regions)
	for i, r := range shapes {
		m.path("fill r"+strconv.Itoa(min(len(shapes)-1-i, 3)), r.rings, true, "")
	}
	if len(study) > 0 {
		m.path("study", f.shape(study), true, "")
	}
	m.f(`<rect class="frame" width="%d" height="%d"/></svg>`, f.w, f.h)
	return m.html()
}
