// Package pipeline is one run from inputs to a bundle: open, resolve columns
// and CRS, choose the plane, tally in one parallel pass, estimate, analyse,
// guard, write. Data flow from left to right and nothing calls back.
package pipeline

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"runtime/debug"
	"slices"
	"time"

	"drumlin/bandwidth"
	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/io/events"
	"drumlin/io/record"
	"drumlin/io/report"
	"drumlin/mv"
	"drumlin/spatial"
)

// mostPasses bounds the passes over the events: one, and two more where the
// first tally proves too coarse.
const mostPasses = 3

// finerTiles is the tile budget of a repeated pass: a full square of 4,096
// cells and some more.
const finerTiles = 5120

// Clock gives the time; a parameter so that tests can hold it.
type Clock func() time.Time

// Result is what a run of Map found, for the command's own words.
type Result struct {
	Record  *record.Record
	Release *spatial.Release
}

// Map does the main job.
func Map(ctx context.Context, s *config.Settings, report *progress.Reporter, clock Clock) (*Result, error) {
	defer limitHeap()()
	run := &run{settings: s, report: report, clock: clock, started: clock()}
	run.workers = s.Workers
	if run.workers == 0 {
		run.workers = runtime.GOMAXPROCS(0)
	}
	sources, err := openAll(ctx, s.Inputs)
	if err != nil {
		return nil, err
	}
	defer closeAll(sources)
	run.sources = sources
	return run.do(ctx)
}

// run carries one run through its stages.
type run struct {
	settings *config.Settings
	report   *progress.Reporter
	clock    Clock
	started  time.Time
	workers  int
	sources  []events.Source
	stages   []record.Stage
	warnings []string
}

// timed runs a stage and notes how long it took.
func (r *run) timed(name string, f func() error) error {
	from := r.clock()
	err := f()
	r.stages = append(r.stages, record.Stage{Name: name, Seconds: math.Round(r.clock().Sub(from).Seconds()*1e4) / 1e4})
	return err
}

func (r *run) do(ctx context.Context) (*Result, error) {
	if err := r.checkPicture(); err != nil {
		return nil, err
	}
	target, err := r.openTarget(ctx)
	if err != nil {
		return nil, err
	}
	defer target.Abort()

	digests := r.startDigests(ctx)
	in, err := resolve(r.settings, r.sources)
	if err != nil {
		return nil, err
	}
	if in.area, err = readArea(r.settings.StudyArea, in.input.Plane); err != nil {
		return nil, err
	}
	var rows int64
	for _, s := range r.sources {
		if n := s.Info().Rows; n < 0 || rows < 0 {
			rows = -1
		} else {
			rows += n
		}
	}
	r.report.Expect(max(rows, 0))
	w := &pool{workers: r.workers, report: r.report}
	if err := r.timed("plane", func() error { return in.choosePlane(ctx, r.settings, r.sources, w) }); err != nil {
		return nil, err
	}
	r.warnings = append(r.warnings, in.warnings...)
	if err := in.area.onPlane(in.plane); err != nil {
		return nil, err
	}
	orientation, err := contextLines(r.settings.Context, in.plane)
	if err != nil {
		return nil, err
	}
	zones, zoned, err := r.readZones(in)
	if err != nil {
		return nil, err
	}

	var counted *tallied
	var est *Estimate
	opt := r.tallyOptions(in)
	for pass := 1; est == nil; pass++ {
		if err := r.timed("tally", func() (err error) { counted, err = in.count(ctx, r.sources, w, opt); return err }); err != nil {
			return nil, err
		}
		if counted.account.Used == 0 {
			return nil, fmt.Errorf("%w: %s", ErrNoEvents, reasonsText(counted.account))
		}
		if in.area == nil {
			counted.tally.TrimStrays()
		}
		if counted.account.Read > 0 && pass == 1 {
			r.report.Expect(0)
		}
		sel, err := r.selection()
		if err != nil {
			return nil, err
		}
		if sel.Method == "likelihood-cv" {
			if sel.Sample, err = in.drawSample(ctx, r.sources, w, occupiedBox(counted.tally), bandwidth.SubSample); err != nil {
				return nil, err
			}
		}
		m := &estimator{tally: counted.tally, sel: sel, nodes: r.settings.Nodes(), workers: r.workers, canRepeat: pass < mostPasses, progress: r.report.Stage}
		if in.area != nil {
			m.edge = edge{area: in.area.plane, form: r.settings.Edge}
		}
		err = r.timed("estimate", func() (err error) { est, err = m.estimate(ctx); return err })
		var finer *finerNeeded
		switch {
		case errors.As(err, &finer):
			opt.Finest, opt.Tiles, opt.Box = max(finer.Level, opt.Grain+6), finerTiles, &finer.Box
			est = nil
			counted = nil
		case err != nil:
			return nil, err
		}
	}

	var release *spatial.Release
	var analysis spatial.Analysis
	err = r.timed("regions", func() (err error) {
		r.report.Stage("regions and contours")
		var warnings []string
		if analysis, warnings, err = analyse(est, r.settings); err != nil {
			return err
		}
		r.warnings = append(r.warnings, warnings...)
		analysis.Zones = zones
		release, err = spatial.Guard(analysis, spatial.Policy{MinEvents: r.settings.MinEvents, Workers: r.workers}, in.plane)
		return err
	})
	if err != nil {
		return nil, err
	}
	r.warnEstimate(est, counted)
	r.warnDistortion(in.plane, est)
	inputs, err := digests.wait(counted.perFile)
	if err != nil {
		return nil, err
	}
	rec := r.record(in, counted, est, release, inputs)
	rec.Zones = zoned
	rec.Guard.ClosePairs = closePairs(release)
	page := report.Page{Record: rec, Release: release, Projection: in.plane, Context: orientation, Choices: choices(est), Period: pagePeriod(rec)}
	if in.area != nil {
		page.StudyArea = in.area.plane.Plane()
	}
	if r.settings.Sensitivity {
		err := r.timed("sensitivity", func() (err error) {
			r.report.Stage("regions at H/2 and 2H")
			page.Alternatives, rec.Sensitivity, err = sensitivity(est, r.settings, release, in.plane, r.workers)
			return err
		})
		if err != nil {
			return nil, err
		}
	}
	r.report.Stage("writing")
	if err := r.write(ctx, target, release, rec, page); err != nil {
		return nil, err
	}
	for _, text := range r.warnings {
		r.report.Warn(text)
	}
	return &Result{Record: rec, Release: release}, nil
}

// tallyOptions returns the grain and finest step: for places on the earth 1.6 cm
// and 1 m; without a place finer for small extents, so that a table of a few
// metres can be mapped too.
func (r *run) tallyOptions(in *reading) mv.TallyOptions {
	opt := mv.TallyOptions{Grain: -6, Finest: 0}
	if !in.input.Plane {
		return opt
	}
	extent := 0.0
	for axis := range 2 {
		extent = max(extent, math.Abs(in.extent.lo[axis]), math.Abs(in.extent.hi[axis]))
	}
	for extent > 0 && opt.Grain > -24 && math.Ldexp(extent, -opt.Grain) < 1<<24 {
		opt.Grain--
		opt.Finest--
	}
	return opt
}

func (r *run) warnEstimate(e *Estimate, c *tallied) {
	warn := func(format string, a ...any) { r.warnings = append(r.warnings, fmt.Sprintf(format, a...)) }
	switch {
	case e.Floored:
		warn("the lattice of %d nodes cannot show this bandwidth: H was floored at %g lattice steps; give a larger --lattice or a study area", e.Nodes, stepsFloor)
	case e.StepsPerScale < stepsWanted:
		warn("the minor scale of H spans %.2g lattice steps, fewer than %g: expect an error of about %.2g of the highest density", e.StepsPerScale, stepsWanted, e.LatticeError)
	}
	if out := c.tally.Outside(); out > 0 {
		warn("%s events lie far outside the rest and were left out of the map", progress.Count(out))
	}
	asked := c.account.SetAside[events.OutsideStudyArea] + c.account.SetAside[events.Filtered] + c.account.SetAside[events.OutsideTimeWindow]
	if share := float64(c.account.SetAsideTotal()-asked) / float64(c.account.Read-asked); share > 0.2 {
		warn("%.0f %% of the rows were set aside: %s", 100*share, reasonsText(c.account))
	}
}

// reasonsText lists why rows were set aside.
func reasonsText(a events.Account) string {
	if a.Read == 0 {
		return "there are no rows"
	}
	text := ""
	for _, reason := range events.Reasons() {
		if n := a.SetAside[reason]; n > 0 {
			if text != "" {
				text += ", "
			}
			text += fmt.Sprintf("%s %s", progress.Count(n), reason)
		}
	}
	return text
}

// limitHeap keeps garbage from the readers small against the lattice; the
// returned function restores the setting.
func limitHeap() func() {
	old := debug.SetGCPercent(50)
	return func() { debug.SetGCPercent(old) }
}

// byName returns a copy in the order of the names.
func byName(in []record.Input) []record.Input {
	out := slices.Clone(in)
	slices.SortFunc(out, func(a, b record.Input) int {
		if a.Path < b.Path {
			return -1
		}
		return 1
	})
	return out
}
