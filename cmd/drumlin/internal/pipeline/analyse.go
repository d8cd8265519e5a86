package pipeline

import (
	"fmt"
	"math"
	"slices"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/mv"
	"drumlin/spatial"
)

const (
	perKM2 = 1e6 // square metres in a square kilometre

	// bandContent is the share of the events above the lowest isoband's lower
	// edge when the levels are chosen here.
	bandContent = 0.98
	// loneScales: a region's border is not drawn below the density that one
	// event alone has this many scales away.
	loneScales = 3.0
)

// analyse puts the estimate into the form that the guard takes.
func analyse(e *Estimate, s *config.Settings) (spatial.Analysis, []string, error) {
	a := spatial.Analysis{
		Density: e.Density, Counts: e.Counts, Weights: e.Weights, FineCounts: e.FineCounts,
		Events: e.Events, Total: e.Total,
		KernelAtZero: e.KernelAtZero(), RegionRule: s.RegionRule, Area: e.Edge.area,
	}
	warnings, err := addThresholds(&a, e, s)
	if err != nil {
		return a, nil, err
	}
	if a.BandLevels, err = bandLevels(e, s); err != nil {
		return a, nil, err
	}
	least := max(s.MinEvents, 1) * a.KernelAtZero / e.Events
	for _, m := range spatial.FindMaxima(e.seen(), least) {
		at := spatial.XY{X: m.X, Y: m.Y}
		if e.Edge.area != nil && !e.Edge.area.Contains(at) {
			at = spatial.XY{X: e.Density.Coord(0, m.I), Y: e.Density.Coord(1, m.J)}
			m.Value = e.Density.Values[m.J*e.Density.N[0]+m.I]
		}
		a.Peaks = append(a.Peaks, e.summit(at, m.Value))
	}
	slices.SortStableFunc(a.Peaks, func(p, q spatial.Summit) int {
		switch {
		case p.Density > q.Density:
			return -1
		case p.Density < q.Density:
			return 1
		}
		return 0
	})
	return a, warnings, nil
}

// regionThreshold returns the density on the border of the region with a
// content, by the rule asked for.
func (e *Estimate) regionThreshold(atZero, content float64, rule string) (float64, error) {
	density := e.Density.Values
	if rule == "mass" {
		return mv.DensityQuantile(density, e.massWeights(), content)
	}
	counted := e.Counts
	if e.Weights.Values != nil {
		counted = e.Weights
	}
	if len(e.Inside.Values) > 0 {
		return mv.DensityQuantile(e.leaveOneOut(atZero), counted.Values, content)
	}
	q, err := mv.DensityQuantile(density, counted.Values, content)
	if err != nil {
		return 0, err
	}
	return mv.LeaveOneOut(q, e.EffectiveN, atZero), nil
}

func addThresholds(a *spatial.Analysis, e *Estimate, s *config.Settings) (warnings []string, err error) {
	lone := e.lone()
	contents := slices.Sorted(slices.Values(s.Content))
	for _, c := range contents {
		t, err := e.regionThreshold(a.KernelAtZero, c/100, s.RegionRule)
		if err != nil {
			return nil, err
		}
		if t < lone {
			warnings = append(warnings, fmt.Sprintf("the %g %% region would reach beyond every event: more than %g %% of the events stand alone at this bandwidth; its border is drawn %g scales from the last event", c, 100-c, loneScales))
			t = lone
		}
		a.Regions = append(a.Regions, spatial.Threshold{Content: c / 100, Density: t})
	}
	return warnings, nil
}

// bandLevels returns the isobands' lower edges as densities, rising.
func bandLevels(e *Estimate, s *config.Settings) ([]float64, error) {
	if len(s.BandContent) > 0 {
		return e.contentLevels(s)
	}
	unit := 1 / (e.Total * perKM2)
	n := s.BandCount()
	if n == 0 {
		out := make([]float64, len(s.Bands))
		for i, v := range s.Bands {
			out[i] = v * unit
		}
		return out, nil
	}
	counted := e.Counts
	if e.Weights.Values != nil {
		counted = e.Weights
	}
	low, err := mv.DensityQuantile(e.Density.Values, counted.Values, bandContent)
	if err != nil {
		return nil, err
	}
	top := e.top()
	var out []float64
	for _, v := range roundLevels(low/unit, top/unit, n) {
		out = append(out, v*unit)
	}
	return out, nil
}

// contentLevels are the region borders of the contents asked for, rising.
func (e *Estimate) contentLevels(s *config.Settings) ([]float64, error) {
	atZero := e.KernelAtZero()
	lone := e.lone()
	var out []float64
	for _, c := range s.BandContent {
		t, err := e.regionThreshold(atZero, c/100, s.RegionRule)
		if err != nil {
			return nil, err
		}
		out = append(out, max(t, lone))
	}
	slices.Sort(out)
	return slices.Compact(out), nil
}

// lone is the density that one event alone has loneScales scales away.
func (e *Estimate) lone() float64 {
	return e.KernelAtZero() / e.EffectiveN * math.Exp(-loneScales*loneScales/2)
}

// roundLevels returns n rising levels from about low to below top in equal
// ratios, each rounded to two significant digits (three where two would make
// neighbours equal).
func roundLevels(low, top float64, n int) []float64 {
	if !(low > 0) || low >= top {
		low = top / 100
	}
	ratio := math.Pow(top/low, 1/float64(n))
	for digits := 2; digits < 9; digits++ {
		out := make([]float64, 0, n)
		for i := range n {
			v := roundTo(low*math.Pow(ratio, float64(i)), digits)
			if i > 0 && v <= out[i-1] || v >= top {
				break
			}
			out = append(out, v)
		}
		if len(out) == n {
			return out
		}
	}
	return []float64{low}
}

// roundTo rounds v > 0 to a number of significant digits.
func roundTo(v float64, digits int) float64 {
	scale := math.Pow(10, float64(digits-1)-math.Floor(math.Log10(v)))
	if scale >= 1 {
		return math.Round(v*scale) / scale
	}
	unit := math.Round(1 / scale)
	return math.Round(v/unit) * unit
}
