package survey

import (
	"fmt"
	"math"
	"slices"
)

const (
	tallest     = 10
	mostDigits  = 17
	fencePadded = 2.0 // widths of the middle 95 % on every side, as the map's own fence
	manyShare   = 0.2
)

// Judge describes the positions. limit is the ratio of tied pairs to events
// above which cross-validation collapses; with places the tallest stacks say
// where they are.
func (t *Tally) Judge(c *Coordinates, limit float64, places bool) {
	p := t.places
	c.Rows, c.TieLimit, c.NullIsland, c.Swapped = p.rows, limit, t.island, t.swapped
	c.Distinct, c.OneIn, c.Estimated = min(p.rows, int64(len(p.at))*p.scale()), p.scale(), p.level > 0
	c.CRSGuesses, c.Stacks, c.Decimals, c.Sentinels = []string{}, []Stack{}, []Decimals{}, []Sentinel{}
	for i, n := range t.marks {
		if n > 0 {
			c.Sentinels = append(c.Sentinels, Sentinel{sentinels[i], n})
		}
	}
	if t.pairs > 0 {
		c.Extent = []float64{t.x0, t.y0, t.x1, t.y1}
	}
	if len(p.at) == 0 {
		if t.pairs > 0 {
			c.CRSGuesses = guess(t.x0, t.y0, t.x1, t.y1)
		}
		return
	}
	all := p.sorted()
	for _, s := range all {
		if s.rows > 1 {
			c.Repeated += s.rows * p.scale()
			c.TiedPairs += float64(s.rows) * float64(s.rows-1) / 2 * float64(p.scale())
		}
	}
	c.TieRatio = c.TiedPairs / float64(p.rows)
	c.Repeated = min(c.Repeated, p.rows)
	for _, s := range all[:min(tallest, len(all))] {
		if s.rows < 2 {
			break
		}
		e := Stack{Rows: s.rows}
		if places {
			e.X, e.Y = &s.x, &s.y
		}
		c.Stacks = append(c.Stacks, e)
	}
	c.NoTaller = all[0].rows
	if p.level > 0 {
		c.NoTaller = int64(slices.Max(p.cells))
	}
	var digits [mostDigits + 1]int64
	for _, s := range all {
		digits[min(mostDigits, max(decimals(s.x), decimals(s.y)))] += s.rows * p.scale()
	}
	for d, n := range digits {
		if n > 0 {
			c.Decimals = append(c.Decimals, Decimals{d, n})
		}
	}
	x := quantiles(all, func(s stack) float64 { return s.x }, 0.025, 0.975)
	y := quantiles(all, func(s stack) float64 { return s.y }, 0.025, 0.975)
	c.Middle95 = []float64{x[0], y[0], x[1], y[1]}
	c.CRSGuesses = guess(x[0], y[0], x[1], y[1])
	dx, dy := fencePadded*(x[1]-x[0]), fencePadded*(y[1]-y[0])
	for _, s := range all {
		if s.x < x[0]-dx || s.x > x[1]+dx || s.y < y[0]-dy || s.y > y[1]+dy {
			c.Outliers += s.rows * p.scale()
		}
	}
}

// guess names the systems that numbers of this size could belong to.
func guess(x0, y0, x1, y1 float64) []string {
	within := func(a0, b0, a1, b1 float64) bool { return x0 >= a0 && x1 <= a1 && y0 >= b0 && y1 <= b1 }
	var out []string
	if within(-180, -90, 360, 90) {
		out = append(out, "EPSG:4326 (degrees, longitude first)")
		if !within(-90, -90, 90, 90) || x1-x0 < 1e-3 && y1-y0 < 1e-3 {
			return out
		}
		return append(out, "degrees with latitude first, if the columns are the wrong way round")
	}
	if within(-90, -180, 90, 360) {
		return []string{"EPSG:4326 with x and y the wrong way round (latitude first)"}
	}
	for _, c := range []struct {
		a0, b0, a1, b1 float64
		name           string
	}{
		{100e3, 0, 900e3, 10e6, "UTM (EPSG:326nn north or 327nn south of the equator, nn the zone)"},
		{2.4e6, 1.3e6, 7.4e6, 5.6e6, "EPSG:3035 (Europe, equal-area)"},
		{0, 6.0e6, 1.3e6, 7.2e6, "EPSG:2154 (France)"},
		{-2.5e6, 200e3, 2.4e6, 3.4e6, "EPSG:5070 (conterminous United States, equal-area)"},
		{-20037509, -20048967, 20037509, 20048967, "EPSG:3857 (web maps)"},
	} {
		if within(c.a0, c.b0, c.a1, c.b1) {
			out = append(out, c.name)
		}
	}
	if len(out) == 0 {
		return []string{"no system known here"}
	}
	return out
}

// Conclude says in words what stands out.
func (r *Report) Conclude() {
	r.Findings = []string{}
	say := func(format string, a ...any) { r.Findings = append(r.Findings, fmt.Sprintf(format, a...)) }
	if r.Map.Refusal != "" {
		say("map would stop: %s", r.Map.Refusal)
	}
	if a := r.Map.Account; a != nil && a.Read > 0 && float64(a.SetAsideTotal()) > manyShare*float64(a.Read) {
		say("map would set aside %.0f %% of the rows", 100*float64(a.SetAsideTotal())/float64(a.Read))
	}
	c := r.Coordinates
	if c == nil {
		return
	}
	if c.Swapped > 0 && float64(c.Swapped) > 0.5*float64(max(c.Rows, 1)) {
		say("%s and %s look the wrong way round: %d rows have a latitude beyond 90 and a longitude within it; try --x %s --y %s", c.X, c.Y, c.Swapped, c.Y, c.X)
	}
	if c.NullIsland > 0 {
		say("%d rows lie at 0, 0, which usually means that no position was found; in degrees map sets them aside", c.NullIsland)
	}
	for _, s := range c.Sentinels {
		say("%d rows have %g for a coordinate, which often stands for unknown", s.Rows, s.Value)
	}
	if c.TieRatio > c.TieLimit {
		say("%.3g tied pairs an event is above %.3g: cross-validation (lscv) has no minimum here, plug-in does", c.TieRatio, c.TieLimit)
	}
	if len(c.Stacks) > 0 && c.Rows > 0 && float64(c.NoTaller) > 0.01*float64(c.Rows) && c.NoTaller >= 10 && !c.Estimated {
		say("one position holds %d rows, %.2g %% of all: often a depot, a centroid or a default", c.NoTaller, 100*float64(c.NoTaller)/float64(c.Rows))
	}
	if c.Rows > 0 && float64(c.Distinct) < 0.5*float64(c.Rows) {
		say("%d rows stand on %d positions: geocoded or rounded", c.Rows, c.Distinct)
	}
	coarse := int64(0)
	for _, d := range c.Decimals {
		if d.Digits <= 3 {
			coarse += d.Rows
		}
	}
	if len(c.Extent) == 4 && math.Abs(c.Extent[0]) <= 360 && math.Abs(c.Extent[1]) <= 90 && c.Rows > 0 && float64(coarse) > manyShare*float64(c.Rows) {
		say("%.0f %% of the positions have three decimals or fewer, about 100 m or worse in degrees: do not read the map more finely", 100*float64(coarse)/float64(c.Rows))
	}
	if c.Outliers > 0 {
		say("%d rows lie far outside the rest", c.Outliers)
	}
}
