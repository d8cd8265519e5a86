package bandwidth

import (
	"context"
	"errors"
	"fmt"
	"math"

	"drumlin/mv"
)

const (
	temper       = 0.15 // power of a mixture's weight exp(-BIC/2) in the average
	plugInNeeds  = 0.5  // standard errors by which plug-in must beat the mixtures
	lscvNeeds    = 2.5  // and a minimiser of the yardstick itself
	tieTrust     = 0.7  // share of the tie limit above which cross-validation judges nothing
	partOfPlugIn = 1.0 / 8
	fewEvents    = 40 // below this no mixture is fitted and cross-validation not asked
)

// Auto chooses a matrix by estimated risk, in three steps.
//
//  1. Normal mixtures of 1, 2, ... components are fitted to the events
//     (FitMixtures), and H minimises the average of their exact mean integrated
//     squared errors (ExactMISE), each mixture with weight exp(-0.15 BIC/2): the
//     information criterion's own weights, flattened, since a mixture too few
//     costs a map more than one too many.
//  2. Three-stage plug-in, with unconstrained and with scalar pilots, takes its
//     place where least-squares cross-validation, which is unbiased for the
//     error of each, finds it better by half a standard error or more.
//  3. So does the least-squares cross-validation matrix, where it is better by
//     2.5 standard errors: at large n, where the density has more parts than a
//     mixture can hold.
//
// The standard error is that of twice the mean, over the events, of the
// difference of the two leave-one-out densities. Notes say which step decided.
// Past seven tenths of the tie limit cross-validation and mixtures would see
// repeated positions as sharp peaks: three-stage plug-in is taken, and a note
// says so. Without node counts and sample, or below 40 events, likewise.
//
// Criterion is the averaged mean integrated squared error, or the criterion of
// the selector that decided. Pilots, Variance and Bias2 are three-stage
// plug-in's evidence about the matrix, whatever decided. On the study's targets this stays closer to the
// optimum than any selector that it chooses from: see Guidance in the package
// comment.
//
// Cost: about 500 blocks of nodes times the components times some hundred
// passes, and two to seven surfaces.
func Auto(e Events, opt Options) (Choice, error) {
	if err := errors.Join(e.check(), opt.check()); err != nil {
		return Choice{}, err
	}
	whole := e
	e.WholeN = 0
	opt.Stages, opt.ScalarPilots = 0, false
	plug, err := PlugInBy(e, opt)
	if err != nil {
		return Choice{}, err
	}
	auto := func(c Choice, note string) (Choice, error) {
		c.Method, c.Shape, c.Pilots = "auto", opt.Shape, plug.Pilots
		psi := plug.Pilots[len(plug.Pilots)-1].Psi
		if a, err := mv.AMISE(mv.Gaussian, c.Matrix, psi, e.n()); err == nil {
			c.Variance, c.Bias2 = a.Variance, a.SquaredBias
		}
		c.Notes = append([]string{note}, c.Notes...)
		return c.finish(whole, c.Matrix)
	}
	if e.Counts.Values == nil && e.Sample == nil {
		return auto(plug, "three-stage plug-in: neither node counts nor events were at hand for mixtures")
	}
	if e.n() < fewEvents {
		return auto(plug, fmt.Sprintf("three-stage plug-in: fewer than %d events are too few to fit mixtures to", fewEvents))
	}
	if ties := CountTies(e); ties.Ratio > tieTrust*ties.Limit {
		return auto(plug, fmt.Sprintf("three-stage plug-in, which repeated positions mislead least: %s", ties))
	}
	best, note, err := mixtureChoice(e, plug, opt)
	if err != nil {
		return auto(plug, fmt.Sprintf("three-stage plug-in: no mixture could be fitted (%v)", err))
	}
	judge := &judge{e: e, crit: LSCV(e.Sums()), base: best.Matrix}
	winner, gain := best, 0.0
	consider := func(c Choice, needs float64, text string) error {
		diff, se, err := judge.compare(c.Matrix)
		if err == nil && diff-needs*se > gain {
			gain = diff - needs*se
			winner = c
			note = fmt.Sprintf("%s: cross-validation puts it %.2g below the mixtures' matrix (standard error %.2g)", text, diff, se)
		}
		return err
	}
	if err := consider(plug, plugInNeeds, "three-stage plug-in"); err != nil {
		return Choice{}, err
	}
	opt.ScalarPilots = true
	if c, err := PlugInBy(e, opt); err == nil {
		if err := consider(c, plugInNeeds, "three-stage plug-in with scalar pilots"); err != nil {
			return Choice{}, err
		}
	}
	opt.ScalarPilots = false
	if c, err := fromMatrix(e, opt, winner.Matrix); err == nil && c.Status != Border {
		if err := consider(c, lscvNeeds, "least-squares cross-validation"); err != nil {
			return Choice{}, err
		}
	}
	return auto(winner, note)
}

// fromMatrix minimises LSCV from one matrix and from half of it.
func fromMatrix(e Events, opt Options, h mv.BandwidthMatrix) (Choice, error) {
	f, err := newFrame(CommonScale, e.dim(), e.Covariance)
	if err != nil {
		return Choice{}, err
	}
	start, err := f.fromData(h)
	if err != nil {
		return Choice{}, err
	}
	co := coords{f.d, opt.Shape}
	c, err := f.descendFrom(e, opt.Shape, LSCV(e.Sums()), [][]float64{co.from(start), co.from(multiple(start, 0.4))}, 1, 0)
	c.Variance = gaussR(f.d) / (e.n() * c.Matrix.SqrtDet())
	return c, err
}

// mixtureChoice minimises the averaged exact error of fitted mixtures.
func mixtureChoice(e Events, plug Choice, opt Options) (Choice, string, error) {
	v := plug.Matrix.Eigenvalues()
	fit, err := fitMixtures(e, v[len(v)-1]*partOfPlugIn*partOfPlugIn)
	if err != nil {
		return Choice{}, "", err
	}
	d, n := e.dim(), e.n()
	weights := fit.Tempered(temper)
	var crits []Criterion
	var used []float64
	likeliest := 0
	for i, w := range weights {
		if w > weights[likeliest] {
			likeliest = i
		}
		if w > 1e-3 {
			crits, used = append(crits, ExactMISE(fit.Models[i], n)), append(used, w)
		}
	}
	average := func(h mv.BandwidthMatrix) (value float64, grad []float64) {
		grad = make([]float64, d*d)
		for i, c := range crits {
			v, g := c(h)
			value += used[i] * v
			for k := range grad {
				grad[k] += used[i] * g[k]
			}
		}
		return value, grad
	}
	f, err := newFrame(CommonScale, d, e.Covariance)
	if err != nil {
		return Choice{}, "", err
	}
	co := coords{d, opt.Shape}
	var from [][]float64
	for i, c := range crits {
		if used[i] < 0.1 {
			continue
		}
		best, err := f.descendFrom(e, opt.Shape, c, f.startsAt(plug.Matrix, co), 1, 0)
		if err != nil {
			continue
		}
		start, err := f.fromData(best.Matrix)
		if err == nil {
			from = append(from, co.from(start))
		}
	}
	from = append(from, f.startsAt(plug.Matrix, co)...)
	c, err := f.descendFrom(e, opt.Shape, average, from, 3, 0)
	if err != nil {
		return Choice{}, "", err
	}
	c.Variance = gaussR(d) / (n * c.Matrix.SqrtDet())
	c.Bias2 = c.Criterion - c.Variance
	return c, fmt.Sprintf("exact error of fitted normal mixtures, that of %d components the likeliest", likeliest+1), nil
}

// startsAt returns the fixed starts around a matrix of the data, and around a
// tenth of it.
func (f *frame) startsAt(h mv.BandwidthMatrix, c coords) [][]float64 {
	start, err := f.fromData(h)
	if err != nil {
		return nil
	}
	return append(starts(start, c), starts(multiple(start, 0.1), c)...)
}

// judge compares matrices with a base by least-squares cross-validation.
type judge struct {
	e     Events
	crit  Criterion
	base  mv.BandwidthMatrix
	value float64
	at    []float64 // base density where the events are
}

// compare returns by how much the criterion at h is below that at the base, and
// the standard error of that as an estimate of the difference of the two
// integrated squared errors: of 2/n sum_i (f_h - f_base)_-i (X_i). The
// densities are computed only for a matrix that would win at all.
func (j *judge) compare(h mv.BandwidthMatrix) (gain, se float64, err error) {
	if j.at == nil {
		j.value, _ = j.crit(j.base)
	}
	v, _ := j.crit(h)
	if gain = j.value - v; gain <= 0 {
		return gain, 0, nil
	}
	if j.at == nil {
		if j.at, err = j.densities(j.base); err != nil {
			return 0, 0, err
		}
	}
	f, err := j.densities(h)
	if err != nil {
		return 0, 0, err
	}
	n := j.e.n()
	own := (kernelAtZero(h) - kernelAtZero(j.base)) / (n - 1)
	var w0, w1, w2 float64
	for i := range f {
		k := j.weight(i)
		if k == 0 {
			continue
		}
		d := (f[i]-j.at[i])*n/(n-1) - own
		w0 += k
		w1 += k * d
		w2 += k * d * d
	}
	w1 /= w0
	return gain, 2 * math.Sqrt(math.Max(0, w2/w0-w1*w1)/n), nil
}

func (j *judge) weight(i int) float64 {
	if j.e.Spectrum != nil && j.e.Counts.Values != nil {
		return j.e.Counts.Values[i]
	}
	return j.e.Sample.Weight(i)
}

// densities evaluates the density at the nodes or at the events.
func (j *judge) densities(h mv.BandwidthMatrix) ([]float64, error) {
	if j.e.Spectrum != nil && j.e.Counts.Values != nil {
		g := j.e.Spectrum.Density(h)
		if len(g.Values) == len(j.e.Counts.Values) {
			return g.Values, nil
		}
		return nil, fmt.Errorf("bandwidth: auto: counts on %v nodes, surfaces on %v: %w", j.e.Counts.N, g.N, mv.ErrShape)
	}
	d, err := mv.NewDirect(j.e.Sample, mv.Gaussian, h, mv.EvalOptions{Workers: j.e.workers})
	if err != nil {
		return nil, err
	}
	out := make([]float64, j.e.Sample.Len())
	return out, d.Density(context.Background(), out, j.e.Sample.Columns())
}
