package bandwidth

import (
	"fmt"
	"math"
	"slices"

	"drumlin/mv"
)

const (
	mostComponents  = 12  // of a fitted mixture
	mixtureCells    = 500 // blocks of nodes that it is fitted to
	leastPerPart    = 6   // events that a component rests on
	trialIterations = 5   // of expectation-maximisation before candidates are compared
	fullIterations  = 100
)

// Mixtures are normal mixtures of 1, 2, ... components fitted to the same
// events, with the Bayesian information criterion of each.
type Mixtures struct {
	Models []*mv.NormalMixture
	BIC    []float64
}

// FitMixtures fits normal mixtures to the node weights, or without them to the
// sample, by expectation-maximisation, one component more at a time: every
// component is tried split along each of its principal axes and into a narrow
// and a wide one, and the best trial is carried through; two numbers in a row
// that do not lower the Bayesian information criterion end the search. No
// component has a variance below least, squared data units. It is deterministic
// and commutes with rotations up to the lattice.
//
// Source: Dempster, Laird and Rubin 1977; the growth by splits in the manner of
// Ueda and others 2000; weights by the criterion, Schwarz 1978.
func FitMixtures(e Events, least float64) (*Mixtures, error) {
	if err := e.check(); err != nil {
		return nil, err
	}
	return fitMixtures(e, least)
}

func fitMixtures(e Events, least float64) (*Mixtures, error) {
	d, n, unit := e.dim(), e.n(), e.scale()
	f := &mixtureFit{d: d, n: n, least: max(1e-6, least/(unit*unit))}
	var mean []float64
	switch {
	case e.Counts.Values != nil:
		m, _, err := e.Counts.Moments(n)
		if err != nil {
			return nil, err
		}
		mean = m
		for _, s := range e.Counts.Step {
			f.least = max(f.least, s*s/(unit*unit))
		}
		f.cells = gatherCells(e.Counts, mean, unit, 1.0/mixtureCells)
	case e.Sample != nil:
		s := Thin(e.Sample, SubSample)
		mean = s.Moments().Mean()
		for i := range s.Len() {
			c := cell{w: s.Weight(i) / s.SumWeights(), mean: s.Row(nil, i), scatter: make([]float64, d*d)}
			for k := range mean {
				c.mean[k] = (c.mean[k] - mean[k]) / unit
			}
			f.cells = append(f.cells, c)
		}
	default:
		return nil, fmt.Errorf("bandwidth: mixtures need node counts or events: %w", mv.ErrShape)
	}
	now := fitted{parts: []part{{w: 1, mean: make([]float64, d), cov: scaleAll(append([]float64(nil), e.Covariance...), 1/(unit*unit))}}}
	if err := f.improve(&now, fullIterations); err != nil {
		return nil, err
	}
	out := &Mixtures{}
	best, worse := math.Inf(1), 0
	for k := 1; ; k++ {
		m, err := now.mixture(mean, unit)
		if err != nil {
			return nil, err
		}
		bic := f.bic(now)
		out.Models, out.BIC = append(out.Models, m), append(out.BIC, bic)
		if worse++; bic < best {
			best, worse = bic, 0
		}
		if k == mostComponents || worse == 2 || float64((k+1)*leastPerPart) > n {
			break
		}
		next, ok := f.grow(now)
		if !ok {
			break
		}
		now = next
	}
	return out, nil
}

// Tempered returns weights proportional to exp(-t BIC/2), sum 1; t = 1 gives
// those of the criterion.
func (m *Mixtures) Tempered(t float64) []float64 {
	best := slices.Min(m.BIC)
	w := make([]float64, len(m.BIC))
	var total float64
	for i, b := range m.BIC {
		w[i] = math.Exp(-0.5 * t * (b - best))
		total += w[i]
	}
	return scaleAll(w, 1/total)
}

type part struct {
	w         float64
	mean, cov []float64
}

type fitted struct {
	parts []part
	logL  float64 // mean log-likelihood per unit of weight
}

type mixtureFit struct {
	d     int
	n     float64
	cells []cell
	least float64 // eigenvalue of a component's covariance
}

func (f *mixtureFit) bic(m fitted) float64 {
	d := f.d
	free := len(m.parts)*(1+d+d*(d+1)/2) - 1
	return -2*f.n*m.logL + float64(free)*math.Log(f.n)
}

// grow returns the best mixture with one component more.
func (f *mixtureFit) grow(m fitted) (fitted, bool) {
	best, found := fitted{logL: math.Inf(-1)}, false
	logs, err := f.logDensities(m)
	if err != nil {
		return best, false
	}
	for i, p := range m.parts {
		if p.w*f.n < 2*leastPerPart {
			continue
		}
		values, vectors, err := eigen(f.d, p.cov)
		if err != nil {
			continue
		}
		var trials [][2]part
		for k := range f.d {
			a, b := p.copied(p.w/2), p.copied(p.w/2)
			s := math.Sqrt(values[k])
			for r := range f.d {
				u := vectors[r*f.d+k]
				a.mean[r] += 0.8 * s * u
				b.mean[r] -= 0.8 * s * u
				for c := range f.d {
					cut := 0.64 * values[k] * u * vectors[c*f.d+k]
					a.cov[r*f.d+c] -= cut
					b.cov[r*f.d+c] -= cut
				}
			}
			trials = append(trials, [2]part{a, b})
		}
		a, b := p.copied(p.w*0.3), p.copied(p.w*0.7)
		scaleAll(a.cov, 0.1)
		scaleAll(b.cov, 1.3)
		trials = append(trials, [2]part{a, b})
		rest := logSumWithout(logs, i)
		for _, t := range trials {
			pair := fitted{parts: t[:]}
			if f.improveAmong(&pair, trialIterations, rest, p.w) == nil && pair.logL > best.logL {
				best, found = fitted{logL: pair.logL}, true
				for j, q := range m.parts {
					if j != i {
						best.parts = append(best.parts, q.copied(q.w))
					}
				}
				best.parts = append(best.parts, pair.parts...)
			}
		}
	}
	if !found || f.improve(&best, fullIterations) != nil {
		return best, false
	}
	return best, true
}

func (p part) copied(w float64) part {
	return part{w, append([]float64(nil), p.mean...), append([]float64(nil), p.cov...)}
}

// logDensities returns the logarithm of each weighted component at every cell.
func (f *mixtureFit) logDensities(m fitted) ([][]float64, error) {
	d := f.d
	out := make([][]float64, len(m.parts))
	z := make([]float64, d)
	for i, p := range m.parts {
		h, err := mv.NewBandwidthMatrix(d, p.cov)
		if err != nil {
			return nil, err
		}
		inv := invLower(h)
		logW := math.Log(p.w) - 0.5*(float64(d)*math.Log(2*math.Pi)+h.LogDet())
		out[i] = make([]float64, len(f.cells))
		for c := range f.cells {
			out[i][c] = logW - 0.5*distance2(d, inv, z, f.cells[c].mean, p.mean)
		}
	}
	return out, nil
}

// logSumWithout returns the logarithm of the sum over all components but one.
func logSumWithout(logs [][]float64, skip int) []float64 {
	out := make([]float64, len(logs[0]))
	for c := range out {
		top := math.Inf(-1)
		for i := range logs {
			if i != skip {
				top = max(top, logs[i][c])
			}
		}
		var sum float64
		for i := range logs {
			if i != skip && logs[i][c] > top-40 {
				sum += math.Exp(logs[i][c] - top)
			}
		}
		out[c] = top + math.Log(sum) // -Inf where there is no other
		if len(logs) == 1 {
			out[c] = math.Inf(-1)
		}
	}
	return out
}

// distance2 returns |L^-1 (x - mean)|^2, with scratch z.
func distance2(d int, inv, z, x, mean []float64) (q float64) {
	for a := range d {
		z[a] = 0
		for b := range a + 1 {
			z[a] += inv[a*d+b] * (x[b] - mean[b])
		}
		q += z[a] * z[a]
	}
	return q
}

// improve runs expectation-maximisation.
func (f *mixtureFit) improve(m *fitted, iterations int) error {
	return f.improveAmong(m, iterations, nil, 1)
}

// improveAmong does so for some components of a mixture, the logarithm of the
// others' density held fixed at every cell (nil: there are no others), and the
// sum of the weights of these.
func (f *mixtureFit) improveAmong(m *fitted, iterations int, rest []float64, share float64) error {
	d, k := f.d, len(m.parts)
	type live struct {
		logW  float64
		inv   []float64 // L^-1
		w     float64
		first []float64
		outer []float64
	}
	states := make([]live, k)
	for i := range states {
		states[i] = live{first: make([]float64, d), outer: make([]float64, d*d)}
	}
	p, z := make([]float64, k), make([]float64, d)
	last := math.Inf(-1)
	for it := range iterations {
		for i := range states {
			s := &states[i]
			f.floorCov(m.parts[i].cov)
			h, err := mv.NewBandwidthMatrix(d, m.parts[i].cov)
			if err != nil {
				return err
			}
			s.inv = invLower(h)
			s.logW = math.Log(m.parts[i].w) - 0.5*(float64(d)*math.Log(2*math.Pi)+h.LogDet())
			s.w = 0
			clear(s.first)
			clear(s.outer)
		}
		var logL float64
		for ci := range f.cells {
			c := &f.cells[ci]
			top := math.Inf(-1)
			for i := range states {
				s := &states[i]
				p[i] = s.logW - 0.5*distance2(d, s.inv, z, c.mean, m.parts[i].mean)
				top = max(top, p[i])
			}
			var total float64
			if rest != nil {
				top = max(top, rest[ci])
				total = math.Exp(rest[ci] - top)
			}
			for i, v := range p {
				p[i] = 0
				if v > top-25 {
					p[i] = math.Exp(v - top)
					total += p[i]
				}
			}
			logL += c.w * (top + math.Log(total))
			for i := range states {
				if p[i] < 1e-9*total {
					continue
				}
				r := c.w * p[i] / total
				s := &states[i]
				s.w += r
				for a := range d {
					s.first[a] += r * c.mean[a]
					for b := range a + 1 {
						s.outer[a*d+b] += r * (c.mean[a]*c.mean[b] + c.scatter[a*d+b])
					}
				}
			}
		}
		m.logL = logL
		claimed := 0.0
		for i := range states {
			claimed += states[i].w
		}
		for i := range states {
			s := &states[i]
			if s.w*f.n < leastPerPart {
				return fmt.Errorf("bandwidth: mixture: a component rests on %.3g events: %w", s.w*f.n, ErrNoMinimum)
			}
			q := &m.parts[i]
			q.w = s.w * share / claimed
			for a := range d {
				q.mean[a] = s.first[a] / s.w
			}
			for a := range d {
				for b := range a + 1 {
					v := s.outer[a*d+b]/s.w - q.mean[a]*q.mean[b]
					q.cov[a*d+b], q.cov[b*d+a] = v, v
				}
			}
		}
		if it > 0 && logL-last < 1e-5 {
			break
		}
		last = logL
	}
	return nil
}

// floorCov raises small eigenvalues of a component's covariance.
func (f *mixtureFit) floorCov(cov []float64) {
	d := f.d
	values, vectors, err := eigen(d, cov)
	if err != nil || values[0] >= f.least { // ascending
		return
	}
	for k, v := range values {
		if v >= f.least {
			break
		}
		for a := range d {
			for b := range d {
				cov[a*d+b] += (f.least - v) * vectors[a*d+k] * vectors[b*d+k]
			}
		}
	}
}

// mixture carries the fit back to the units of the data.
func (m fitted) mixture(centre []float64, unit float64) (*mv.NormalMixture, error) {
	var w []float64
	var means, covs [][]float64
	for _, p := range m.parts {
		mean := append([]float64(nil), p.mean...)
		for k := range mean {
			mean[k] = centre[k] + unit*mean[k]
		}
		w, means = append(w, p.w), append(means, mean)
		covs = append(covs, scaleAll(append([]float64(nil), p.cov...), unit*unit))
	}
	return mv.NewNormalMixture(w, means, covs)
}
