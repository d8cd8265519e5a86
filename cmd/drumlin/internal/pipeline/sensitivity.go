package pipeline

import (
	"errors"
	"fmt"
	"slices"

	"drumlin/bandwidth"
	"drumlin/cmd/drumlin/internal/config"
	"drumlin/io/record"
	"drumlin/io/report"
	"drumlin/mv"
	"drumlin/spatial"
)

// sensitivityFactors are the multiples of H beside which the regions are shown.
var sensitivityFactors = []float64{0.5, 2}

// overlapRows is how many lines measure the ground that two regions share; the
// share is good to about one part in a thousand.
const overlapRows = 2048

// sensitivity computes the regions at other multiples of H, guarded like those
// at H, and how much ground they share with them.
func sensitivity(e *Estimate, s *config.Settings, rel *spatial.Release, proj spatial.Projection, workers int) ([]report.Alternative, []record.Sensitivity, error) {
	var shown []report.Alternative
	var recorded []record.Sensitivity
	for _, factor := range sensitivityFactors {
		other, err := e.atFactor(factor)
		if err != nil {
			return nil, nil, err
		}
		alt := report.Alternative{Factor: factor}
		if other.StepsPerScale < stepsFloor {
			alt.Note = fmt.Sprintf("the minor scale spans only %.2g steps of the lattice, so the regions are those of a somewhat larger matrix", other.StepsPerScale)
		}
		a := spatial.Analysis{
			Density: other.Density, Counts: e.Counts, Weights: e.Weights, FineCounts: e.FineCounts,
			Events: e.Events, Total: e.Total, KernelAtZero: other.KernelAtZero(), RegionRule: s.RegionRule, Area: e.Edge.area,
		}
		warnings, err := addThresholds(&a, other, s)
		if err != nil {
			return nil, nil, err
		}
		if len(warnings) > 0 {
			alt.Note = warnings[0]
		}
		r, err := spatial.Guard(a, spatial.Policy{MinEvents: s.MinEvents, Workers: workers}, proj)
		switch {
		case errors.Is(err, spatial.ErrWithheld):
			alt.Note = "withheld: no part rests on enough events"
		case err != nil:
			return nil, nil, fmt.Errorf("regions at %g H: %w", factor, err)
		default:
			alt.Regions = r.Regions()
		}
		rec := record.Sensitivity{Factor: factor, Regions: []record.SensitivityRegion{}}
		for _, q := range alt.Regions {
			o := record.SensitivityRegion{Content: q.Content, ThresholdPerKM2: q.ThresholdPerKM2, AreaKM2: q.AreaKM2}
			for _, at := range rel.Regions() {
				if at.Content == q.Content {
					o.Overlap = overlap(at.Plane, q.Plane)
				}
			}
			rec.Regions = append(rec.Regions, o)
		}
		shown, recorded = append(shown, alt), append(recorded, rec)
	}
	return shown, recorded, nil
}

// atFactor is the estimate with c*H; without errors, which no region needs.
func (e *Estimate) atFactor(c float64) (*Estimate, error) {
	o := *e
	var err error
	if o.Choice.Matrix, err = e.Choice.Matrix.Scaled(c); err != nil {
		return nil, fmt.Errorf("%g times the bandwidth matrix: %w", c, err)
	}
	o.StepsPerScale = o.Choice.Matrix.Ellipse().Minor / e.Density.Step[0]
	return &o, o.surface(false)
}

// choices puts what the selectors say side by side. Where the one used
// estimated the density's second derivatives, every other matrix gets its
// estimated error from the same estimate.
func choices(e *Estimate) []report.Choice {
	used := e.Choice
	list := []bandwidth.Choice{used}
	if used.Method != "normal-reference" {
		if c, err := bandwidth.NormalReference(bandwidth.Events{Spectrum: e.Spectrum, Covariance: e.Covariance}, used.Shape); err == nil {
			list = append(list, c)
		}
	}
	var out []report.Choice
	for i, c := range list {
		ell := c.Matrix.Ellipse()
		q := report.Choice{
			Method: c.Method, Shape: c.Shape.String(), Major: ell.Major, Minor: ell.Minor, Bearing: ell.Bearing,
			Criterion: c.Criterion, Status: c.Status.String(), Evaluations: c.Evaluations, Used: i == 0, Notes: c.Notes,
		}
		if len(used.Pilots) > 0 {
			if bias, variance, ok := errorAt(used, c.Matrix); ok {
				q.SquaredBias, q.Variance = bias, variance
				q.EstimatedErrorRatio = (bias + variance) / (used.Bias2 + used.Variance)
			}
		}
		if c.Method == "fixed" {
			q.Status = "given"
		}
		out = append(out, q)
	}
	return out
}

// errorAt splits the estimated asymptotic mean integrated squared error with
// matrix h, from the functionals psi of order 4 that the plug-in selector
// estimated last: a quarter of vec(H)' Psi vec(H), and R(K)/(n sqrt det H).
// Source: Wand and Jones 1995, section 4.3.
func errorAt(used bandwidth.Choice, h mv.BandwidthMatrix) (bias, variance float64, ok bool) {
	if len(used.Pilots) == 0 {
		return 0, 0, false
	}
	last := used.Pilots[len(used.Pilots)-1]
	psi := map[[2]int]float64{}
	for i, k := range mv.MultiIndices(2, 4) {
		if i >= len(last.Psi) {
			return 0, 0, false
		}
		psi[[2]int(k)] = last.Psi[i]
	}
	if last.Order != 4 {
		return 0, 0, false
	}
	a, b, c := h.At(0, 0), h.At(0, 1), h.At(1, 1)
	bias = (a*a*psi[[2]int{4, 0}] + 4*a*b*psi[[2]int{3, 1}] + (2*a*c+4*b*b)*psi[[2]int{2, 2}] + 4*b*c*psi[[2]int{1, 3}] + c*c*psi[[2]int{0, 4}]) / 4
	return bias, used.Variance * used.Matrix.SqrtDet() / h.SqrtDet(), bias >= 0
}

// overlap returns the area that two sets of polygons share over the area of
// both, measured along evenly spaced lines.
func overlap(a, b spatial.MultiPolygon) float64 {
	lo, hi := 0.0, 0.0
	first := true
	for _, m := range []spatial.MultiPolygon{a, b} {
		for _, p := range m {
			for _, r := range p {
				for _, v := range r {
					if first {
						lo, hi, first = v.Y, v.Y, false
					}
					lo, hi = min(lo, v.Y), max(hi, v.Y)
				}
			}
		}
	}
	if !(hi > lo) {
		return 0
	}
	step := (hi - lo) / overlapRows
	ca, cb := crossings(a, lo, step), crossings(b, lo, step)
	var shared, both float64
	for k := range overlapRows {
		x, y := ca[k], cb[k]
		slices.Sort(x)
		slices.Sort(y)
		la, lb := inside(x), inside(y)
		s := sharedLength(x, y)
		shared += s
		both += la + lb - s
	}
	if both == 0 {
		return 0
	}
	return shared / both
}

// crossings lists, for each line, where rings cross it.
func crossings(m spatial.MultiPolygon, lo, step float64) [][]float64 {
	out := make([][]float64, overlapRows)
	for _, p := range m {
		for _, r := range p {
			for i, v := range r {
				w := r[(i+1)%len(r)]
				if v.Y > w.Y {
					v, w = w, v
				}
				for k := max(0, int((v.Y-lo)/step-0.5)); k < overlapRows; k++ {
					y := lo + (float64(k)+0.5)*step
					if y >= w.Y {
						break
					}
					if y >= v.Y {
						out[k] = append(out[k], v.X+(w.X-v.X)*(y-v.Y)/(w.Y-v.Y))
					}
				}
			}
		}
	}
	return out
}

func inside(x []float64) (sum float64) {
	for i := 0; i+1 < len(x); i += 2 {
		sum += x[i+1] - x[i]
	}
	return sum
}

// sharedLength adds up where two lists of intervals meet.
func sharedLength(x, y []float64) (sum float64) {
	for i, j := 0, 0; i+1 < len(x) && j+1 < len(y); {
		sum += max(0, min(x[i+1], y[j+1])-max(x[i], y[j]))
		if x[i+1] < y[j+1] {
			i += 2
		} else {
			j += 2
		}
	}
	return sum
}
