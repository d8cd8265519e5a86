package pipeline

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"strings"

	"drumlin/bandwidth"
	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/io/record"
	"drumlin/mv"
)

const (
	compareNodes = 512 // nodes along the longer axis that a comparison begins with
	compareSteps = 6.0 // lattice steps that each minor scale should span
)

// Table is the outcome of the command bandwidth.
type Table struct {
	Type       string        `json:"type"`
	Events     int64         `json:"events"`
	EffectiveN float64       `json:"effective_n"`
	Plane      string        `json:"plane"`
	Ties       TieAccount    `json:"ties"`
	Rows       []SelectorRow `json:"selectors"`
	Stability  *Stability    `json:"stability,omitempty"`
	Warnings   []string      `json:"warnings,omitempty"`
}

// TieAccount says how many pairs of events the lattice cannot tell apart.
type TieAccount struct {
	Pairs    float64 `json:"pairs"`
	PerEvent float64 `json:"per_event"`
	Limit    float64 `json:"limit"`
	Scale    float64 `json:"scale_m"`
	Axis     int     `json:"axis"` // 0: at one place; 1, 2: rounded on that axis
}

// SelectorRow is one selector's choice.
type SelectorRow struct {
	Asked     string    `json:"selector"`
	Method    string    `json:"method,omitempty"` // what was done: differs where a selector was replaced
	Shape     string    `json:"shape"`
	Matrix    []float64 `json:"matrix_m2,omitempty"` // h11, h12, h21, h22
	MatrixHex []string  `json:"matrix_hex,omitempty"`
	Major     float64   `json:"major_m,omitempty"`
	Minor     float64   `json:"minor_m,omitempty"`
	Bearing   float64   `json:"bearing_deg"`
	Criterion *float64  `json:"criterion,omitempty"`
	AMISE     float64   `json:"amise,omitempty"`       // by the plug-in functionals, for every row
	Relative  float64   `json:"error_ratio,omitempty"` // AMISE over the least of the table
	Steps     float64   `json:"steps_per_minor_scale,omitempty"`
	Seconds   float64   `json:"seconds"`
	Status    string    `json:"status"`
	Evaluated int       `json:"evaluations,omitempty"`
	Notes     []string  `json:"notes,omitempty"`

	choice bandwidth.Choice
	exact  bool    // chosen by sums over the events, not by the lattice
	wanted float64 // steps of the scale that the search would have gone to
}

// Stability holds intervals of the ellipse under a smoothed bootstrap.
type Stability struct {
	Selector   string     `json:"selector"`
	Replicates int        `json:"replicates"`
	Seed       int        `json:"seed"`
	Pilot      []float64  `json:"drawn_from_matrix_m2"`
	Major      [3]float64 `json:"major_m"` // 5, 50 and 95 per cent
	Minor      [3]float64 `json:"minor_m"`
	Bearing    [3]float64 `json:"bearing_deg"` // about the choice's bearing, so that it may pass 0 or 180
}

// Bandwidths runs the selectors side by side.
func Bandwidths(ctx context.Context, s *config.BandwidthSettings, report *progress.Reporter, clock Clock) (*Table, error) {
	defer limitHeap()()
	r := &run{settings: &s.Settings, report: report, clock: clock, started: clock(), workers: s.Workers}
	if r.workers == 0 {
		r.workers = runtime.GOMAXPROCS(0)
	}
	var err error
	if r.sources, err = openAll(ctx, s.Inputs); err != nil {
		return nil, err
	}
	defer closeAll(r.sources)
	shape, err := bandwidth.ParseShape(s.Shape)
	if err != nil {
		return nil, err
	}
	in, err := resolve(&s.Settings, r.sources)
	if err != nil {
		return nil, err
	}
	w := &pool{workers: r.workers, report: report}
	if err := in.choosePlane(ctx, &s.Settings, r.sources, w); err != nil {
		return nil, err
	}
	c := &comparison{settings: s, run: r, in: in, pool: w, shape: shape, level: math.MaxInt}
	opt := r.tallyOptions(in)
	for pass := 1; ; pass++ {
		counted, err := in.count(ctx, r.sources, w, opt)
		if err != nil {
			return nil, err
		}
		if counted.account.Used == 0 {
			return nil, fmt.Errorf("%w: %s", ErrNoEvents, reasonsText(counted.account))
		}
		counted.tally.TrimStrays()
		c.m = &estimator{tally: counted.tally, sel: Selection{Method: "auto"}, workers: r.workers, canRepeat: pass < mostPasses, progress: report.Stage}
		table, err := c.table(ctx)
		var finer *finerNeeded
		if errors.As(err, &finer) {
			opt.Finest, opt.Tiles, opt.Box = max(finer.Level, opt.Grain+6), finerTiles, &finer.Box
			continue
		}
		if err != nil {
			return nil, err
		}
		r.warnings = append(r.warnings, in.warnings...)
		if out := counted.tally.Outside(); out > 0 {
			r.warnings = append(r.warnings, fmt.Sprintf("%s events lie far outside the rest and were left out", progress.Count(out)))
		}
		table.Plane = in.plane.CRS().Name
		table.Warnings = r.warnings
		return table, nil
	}
}

// comparison carries what the passes share.
type comparison struct {
	settings *config.BandwidthSettings
	run      *run
	in       *reading
	pool     *pool
	shape    bandwidth.Shape
	m        *estimator
	level    int // of the lattice, kept over passes
	// sample for likelihood cross-validation
	sample *mv.Sample
}

// table runs all selectors on one lattice, finer where their matrices ask it.
func (c *comparison) table(ctx context.Context) (*Table, error) {
	t := c.m.tally
	if t.Events() < 3 {
		return nil, fmt.Errorf("%d events are too few: %w", t.Events(), mv.ErrDegenerate)
	}
	lo, hi := t.Bounds()
	base, n := t.Level(), t.EffectiveN()
	cov, err := c.m.covariance(lo, hi, base, n)
	if err != nil {
		return nil, err
	}
	margin := marginFor(c.m.sel, cov, n)
	level := base
	for nodesAt(lo, hi, base, level, margin) > compareNodes*3/2 {
		level++
	}
	for level > base-8 && nodesAt(lo, hi, base, level-1, margin) <= compareNodes*3/2 {
		level--
	}
	level = min(level, c.level)
	if level < base && c.m.canRepeat {
		c.level = level
		return nil, c.m.again(lo, hi, level)
	}
	out := &Table{Type: "bandwidth", Events: t.Events(), EffectiveN: n}
	rows := c.settings.Selectors()
	out.Rows = make([]SelectorRow, len(rows))
	todo := make([]int, len(rows))
	for i := range todo {
		todo[i] = i
	}
	for level = max(level, base); ; level-- {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		e, err := c.events(lo, hi, base, level, margin, cov)
		if err != nil {
			return nil, err
		}
		ties := bandwidth.CountTies(e)
		out.Ties = TieAccount{Pairs: roundTo3(ties.Pairs), PerEvent: roundTo3(ties.Ratio), Limit: roundTo3(ties.Limit), Scale: roundTo3(ties.Scale), Axis: ties.Axis}
		var coarse []int
		for _, i := range todo {
			few := t.Events() <= bandwidth.SubSample // then the sample is all of them
			if (rows[i] == "likelihood-cv" || rows[i] == "lscv" && few) && c.sample == nil {
				if c.sample, err = c.in.drawSample(ctx, c.run.sources, c.pool, occupiedBox(t), bandwidth.SubSample); err != nil {
					return nil, err
				}
			}
			e.Sample = c.sample
			if few && c.sample != nil {
				e.Direct = bandwidth.NewDirectSums(c.sample, c.run.workers)
			}
			c.run.report.Stage(rows[i])
			out.Rows[i] = c.row(rows[i], e, math.Ldexp(1, level))
			if r := &out.Rows[i]; r.Matrix != nil && r.wanted < compareSteps {
				coarse = append(coarse, i)
			}
		}
		finer := len(coarse) > 0 && nodesAt(lo, hi, base, level-1, margin) <= mostNodes
		if next := c.next(out.Rows, coarse, level, func(l int) bool { return nodesAt(lo, hi, base, l, margin) <= mostNodes }); finer && next >= base {
			todo, level = coarse, next+1
			continue
		} else if finer && c.m.canRepeat {
			c.level = next
			return nil, c.m.again(lo, hi, next)
		}
		if err := c.yardstick(out, e); err != nil {
			return nil, err
		}
		return out, c.stability(ctx, out, e)
	}
}

// next returns the level at which the least of the coarse rows' scales spans
// enough steps, or the finest that fits.
func (c *comparison) next(rows []SelectorRow, coarse []int, level int, fits func(level int) bool) int {
	least := math.Inf(1)
	for _, i := range coarse {
		least = min(least, rows[i].wanted)
	}
	want := level - max(1, int(math.Ceil(math.Log2(compareSteps/least)-1e-9)))
	next := level - 1
	for next > want && fits(next-1) {
		next--
	}
	return next
}

// events makes the spectrum of the tally at a level. A Gaussian that spans
// compareSteps steps has died at half of the level's frequencies, so only those
// are kept: the error is that of the level, the cost that of the next.
func (c *comparison) events(lo, hi [2]int64, base, level int, margin [2]float64, cov []float64) (bandwidth.Events, error) {
	n := c.m.tally.EffectiveN()
	weighted := c.m.tally.Weighted()
	nodes, err := c.m.gridAligned(lo, hi, base, level, level+1, margin, weighted)
	if err != nil {
		return bandwidth.Events{}, err
	}
	counts, err := c.m.grid(lo, hi, base, level+1, margin, weighted)
	if err != nil {
		return bandwidth.Events{}, err
	}
	widest, err := bandwidth.NormalScalePilot(cov, 2, n, bandwidth.WidestOrder)
	if err != nil {
		return bandwidth.Events{}, fmt.Errorf("the events lie at one place or on a line: %w", mv.ErrDegenerate)
	}
	reach := make([]float64, 2)
	for k := range reach {
		reach[k] = max(0, kernelReach*math.Sqrt(widest.At(k, k))-margin[k])
	}
	spectrum, err := mv.NewSpectrum(nodes, mv.SpectrumOptions{Reach: reach, Coarsen: 1, EffectiveN: n, Workers: c.run.workers})
	return bandwidth.Events{Spectrum: spectrum, Covariance: cov, Counts: counts}, err
}

// isolatedText names the first isolated events, for the table that only the
// analyst sees.
func isolatedText(at [][]float64) string {
	var names []string
	for _, p := range at[:min(5, len(at))] {
		c := make([]string, len(p))
		for k, v := range p {
			c[k] = fmt.Sprintf("%.6g", v)
		}
		names = append(names, "("+strings.Join(c, ", ")+")")
	}
	if len(names) == 0 {
		return ""
	}
	text := "standing alone on the plane: " + strings.Join(names, ", ")
	if n := len(at) - len(names); n > 0 {
		text += fmt.Sprintf(" and %d more", n)
	}
	return text
}

// row runs one selector. A selector that fails is a row that says why.
func (c *comparison) row(method string, e bandwidth.Events, step float64) SelectorRow {
	r := SelectorRow{Asked: method, Shape: c.shape.String()}
	from := c.run.clock()
	choice, err := bandwidth.Select(e, method, bandwidth.Options{Shape: c.shape})
	r.Seconds = math.Round(c.run.clock().Sub(from).Seconds()*1e4) / 1e4
	if err != nil {
		r.Status, r.Notes = "failed", []string{err.Error()}
		return r
	}
	ell := choice.Matrix.Ellipse()
	r.Method, r.Matrix, r.MatrixHex = choice.Method, choice.Matrix.Entries(), record.HexFloats(choice.Matrix.Entries())
	r.Major, r.Minor, r.Bearing = ell.Major, ell.Minor, ell.Bearing
	r.Steps = ell.Minor / step
	r.wanted = r.Steps
	if u := choice.Unresolved; u > 0 {
		r.wanted = min(r.wanted, u/step)
	}
	if r.exact = method == "lscv" && e.Direct != nil; r.exact {
		r.wanted = math.Inf(1)
	}
	if choice.Status != bandwidth.Closed {
		v := choice.Criterion
		r.Criterion = &v
	}
	r.Status, r.Evaluated, r.Notes, r.choice = choice.Status.String(), choice.Evaluations, choice.Notes, choice
	if text := isolatedText(choice.Isolated); text != "" {
		r.Notes = append(slices.Clone(r.Notes), text)
	}
	if r.Method != method {
		r.Status = r.Method + " instead, " + r.Status
	}
	return r
}

// yardstick gives every row the same estimate of its error.
func (c *comparison) yardstick(t *Table, e bandwidth.Events) error {
	p, err := bandwidth.PlugIn(e, bandwidth.Full, 0)
	if err != nil {
		return err
	}
	psi := p.Pilots[len(p.Pilots)-1].Psi
	least := math.Inf(1)
	for i := range t.Rows {
		r := &t.Rows[i]
		if r.Matrix == nil {
			continue
		}
		a, err := mv.AMISE(mv.Gaussian, r.choice.Matrix, psi, e.Spectrum.EffectiveN())
		if err != nil {
			return err
		}
		r.AMISE = a.Total
		least = min(least, a.Total)
		if r.Steps < stepsWanted && !r.exact {
			r.Notes = append(r.Notes, fmt.Sprintf("the minor scale spans %.2g lattice steps, fewer than %g: the criterion there is partly the lattice's", r.Steps, stepsWanted))
		}
	}
	for i := range t.Rows {
		if r := &t.Rows[i]; r.Matrix != nil {
			r.Relative = r.AMISE / least
		}
	}
	return nil
}

func roundTo3(v float64) float64 {
	if !(v > 0) {
		return 0
	}
	return roundTo(v, 3)
}
