package report

import (
	"html"
	"html/template"
	"math"
	"strconv"

	"drumlin/io/record"
)

// series is one curve of a chart: values at the factors c of H.
type series struct {
	name, class string
	values      []float64
}

const (
	chartWidth, chartHeight = 620, 300
	chartLeft, chartRight   = 46, 190
	chartTop, chartBottom   = 14, 48
	chartSteps              = 64 // intervals between a quarter and four times H
)

// tradeOff draws what H balances. With c·H the estimated squared bias is
// c² times that at H and, in the plane, the variance 1/c of it; the curves are
// in units of the estimated error at H.
func tradeOff(a *record.AMISE) (template.HTML, bool) {
	sum := a.SquaredBias + a.Variance
	if !(sum > 0) || !(a.SquaredBias >= 0) || !(a.Variance >= 0) {
		return "", false
	}
	x := chartFactors()
	bias, variance, both := make([]float64, len(x)), make([]float64, len(x)), make([]float64, len(x))
	for i, c := range x {
		bias[i], variance[i] = c*c*a.SquaredBias/sum, a.Variance/c/sum
		both[i] = bias[i] + variance[i]
	}
	return drawChart("plot-error", x, []series{{"estimated error: their sum", "c-sum", both}, {"squared bias: smeared", "c-bias", bias}, {"variance: left to chance", "c-var", variance}},
		4, "times the estimated error at H",
		"Squared bias rises and variance falls as H grows; their sum is least near the matrix used"), true
}

// profile draws a criterion that was handed in, from its least value up.
func profile(p *Profile) (template.HTML, bool) {
	lo, hi := math.Inf(1), math.Inf(-1)
	for i, v := range p.Values {
		if !(p.Factors[i] > 0) || math.IsNaN(v) || math.IsInf(v, 0) {
			return "", false
		}
		lo, hi = min(lo, v), max(hi, v)
	}
	if !(hi > lo) {
		return "", false
	}
	y := make([]float64, len(p.Values))
	for i, v := range p.Values {
		y[i] = (v - lo) / (hi - lo)
	}
	return drawChart("plot-criterion", p.Factors, []series{{shown(p.Name), "c-sum", y}}, 1, "least to greatest shown", "The criterion as a function of the factor of H"), true
}

func chartFactors() []float64 {
	x := make([]float64, chartSteps+1)
	for i := range x {
		x[i] = math.Exp2(-2 + 4*float64(i)/chartSteps)
	}
	return x
}

// drawChart draws curves over log2 of the factor, y from 0 to top; what rises
// above is cut off.
func drawChart(id string, x []float64, curves []series, top float64, unit, label string) template.HTML {
	m := &markup{}
	lo, hi := math.Log2(x[0]), math.Log2(x[len(x)-1])
	w, h := float64(chartWidth-chartLeft-chartRight), float64(chartHeight-chartTop-chartBottom)
	px := func(c float64) float64 { return chartLeft + w*(math.Log2(c)-lo)/(hi-lo) }
	py := func(v float64) float64 { return chartTop + h*(1-v/top) }
	m.f(`<svg class="chart" viewBox="0 0 %d %d" role="img" aria-label="%s">`, chartWidth, chartHeight, html.EscapeString(label))
	m.f(`<defs><clipPath id="%s"><rect x="%d" y="%d" width="%g" height="%g"/></clipPath></defs>`+"\n", id, chartLeft, chartTop, w, h)
	for v := range int(top) + 1 {
		m.f(`<path class="axis" d="M%d %.1fh%.1f"/><text class="tick end" x="%d" y="%.1f">%d</text>`+"\n", chartLeft, py(float64(v)), w, chartLeft-6, py(float64(v))+4, v)
	}
	for _, t := range []struct {
		c    float64
		text string
	}{{0.25, "H/4"}, {0.5, "H/2"}, {1, "H"}, {2, "2 H"}, {4, "4 H"}} {
		if l := math.Log2(t.c); l < lo-1e-9 || l > hi+1e-9 {
			continue
		}
		m.f(`<path class="axis" d="M%.1f %.1fv5"/><text class="tick mid" x="%.1f" y="%.1f">%s</text>`+"\n", px(t.c), chartTop+h, px(t.c), chartTop+h+19, t.text)
	}
	m.f(`<text class="tick" x="%d" y="%d">`, chartLeft, chartHeight-8)
	m.text("up: " + unit + "; along: bandwidth matrix")
	m.raw("</text>\n")
	if lo <= 0 && hi >= 0 {
		m.f(`<path class="used" d="M%.1f %dv%g"/><text class="tick mid" x="%.1f" y="%d">used</text>`+"\n", px(1), chartTop, h, px(1)+20, chartTop+12)
	}
	last := math.Inf(-1)
	ends := make([]float64, len(curves)) // of the labels, which keep their distance
	for i, c := range curves {
		ends[i] = max(py(c.values[len(x)-1]), chartTop+8, last+16)
		last = ends[i]
	}
	m.f(`<g clip-path="url(#%s)">`+"\n", id)
	for _, c := range curves {
		m.raw(`<path class="curve ` + c.class + `" d="`)
		for k := range x {
			if k == 0 {
				m.raw("M")
			} else {
				m.raw("L")
			}
			m.raw(strconv.FormatFloat(px(x[k]), 'f', 1, 64) + " " + strconv.FormatFloat(py(min(c.values[k], 100*top)), 'f', 1, 64))
		}
		m.raw("\"/>\n")
	}
	m.raw("</g>\n")
	for i, c := range curves {
		m.f(`<path class="curve %s" d="M%d %.1fh16"/><text class="tick" x="%d" y="%.1f">`, c.class, chartWidth-chartRight+6, ends[i]-4, chartWidth-chartRight+26, ends[i])
		m.text(c.name)
		m.raw("</text>\n")
	}
	m.raw("</svg>")
	return m.html()
}
