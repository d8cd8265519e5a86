package pipeline

import (
	"context"
	"fmt"
	"runtime"
	"strings"

	"drumlin/bandwidth"
	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/cmd/drumlin/internal/survey"
	"drumlin/io/events"
)

// Survey reads every row of every input once, and once more to count what map
// would set aside, and says what is in them.
func Survey(ctx context.Context, s *config.Settings, report *progress.Reporter) (*survey.Report, error) {
	defer limitHeap()()
	workers := s.Workers
	if workers == 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	sources, err := openAll(ctx, s.Inputs)
	if err != nil {
		return nil, err
	}
	defer closeAll(sources)
	in, refusal := resolve(s, sources)
	v := &surveying{settings: s, sources: sources, in: in, workers: workers}
	if refusal != nil {
		if v.in, err = v.loosely(); err != nil {
			return nil, err
		}
	}
	report.Stage("reading")
	if err := v.read(ctx, report); err != nil {
		return nil, err
	}
	out := v.report(refusal)
	if refusal == nil {
		if err := v.outlook(ctx, out, &pool{workers: workers, report: report}); err != nil {
			return nil, err
		}
	}
	out.Conclude()
	return out, nil
}

// surveying carries one survey through its stages.
type surveying struct {
	settings *config.Settings
	sources  []events.Source
	in       *reading
	workers  int
	tally    *survey.Tally
	rows     []int64  // by source
	order    []string // of the columns, as they first occur
}

// loosely makes do where map would stop: with the coordinate columns if they
// are clear in every file, whatever their CRS. A row filter that cannot be
// applied is an error all the same.
func (v *surveying) loosely() (*reading, error) {
	r := &reading{}
	for i, src := range v.sources {
		pair, err := events.ResolveIn(v.settings.X, v.settings.Y, v.settings.Geometry, src.Info(), src.Fields())
		if err != nil || i > 0 && (pair.X != r.x || pair.Y != r.y) {
			r.x, r.y = "", ""
			break
		}
		r.x, r.y = pair.X, pair.Y
	}
	var err error
	r.pick, err = newPick(v.settings, v.sources)
	return r, err
}

// read is the pass over all columns of all parts.
func (v *surveying) read(ctx context.Context, report *progress.Reporter) error {
	tallies := make([]*survey.Tally, max(1, v.workers))
	pickers := make([]picker, len(tallies))
	counts := make([][]int64, len(tallies))
	for i := range tallies {
		tallies[i], pickers[i].pick, counts[i] = survey.NewTally(), v.in.pick, make([]int64, len(v.sources))
	}
	screen := events.Screen{Kind: events.Planar}
	if v.in.input.Geographic {
		screen.Kind = events.Geographic
	}
	v.rows = make([]int64, len(v.sources))
	seen := map[string]bool{}
	for i, src := range v.sources { // one after the other: their columns may differ
		var fields []events.Field
		var columns []string
		twice := map[string]int{}
		for _, f := range src.Fields() {
			twice[f.Name]++
		}
		for _, f := range src.Fields() {
			if !seen[f.Name] {
				seen[f.Name] = true
				v.order = append(v.order, f.Name)
			}
			if !f.Readable() || twice[f.Name] > 1 {
				tallies[0].AddColumn(f, nil, nil)
				continue
			}
			fields, columns = append(fields, f), append(columns, f.Name)
		}
		first := len(columns)
		if v.in.x != "" {
			columns = append(columns, v.in.x, v.in.y)
		}
		picked := len(columns) - first
		columns = append(columns, v.in.pick.columns()...)
		if len(columns) == 0 {
			continue
		}
		w := &pool{workers: v.workers, report: report}
		err := w.each(ctx, []events.Source{src}, columns, nil, func(worker, _ int, b events.Batch) error {
			t := tallies[worker]
			counts[worker][i] += int64(b.Len())
			for k, f := range fields {
				t.AddColumn(f, b.Columns[k], b.WordsOf(k))
			}
			if v.in.x == "" {
				return nil
			}
			rest := events.Batch{Columns: b.Columns[first:]}
			if b.Words != nil {
				rest.Words = b.Words[first:]
			}
			rest = pickers[worker].apply(i, rest, picked, t.Account())
			t.AddPairs(rest.Columns[0], rest.Columns[1], screen)
			return nil
		})
		if err != nil {
			return err
		}
	}
	for i, t := range tallies {
		if i > 0 {
			tallies[0].Merge(t)
		}
		for k, n := range counts[i] {
			v.rows[k] += n
		}
	}
	v.tally = tallies[0]
	return nil
}

func (v *surveying) report(refusal error) *survey.Report {
	out := &survey.Report{Type: "survey", Columns: v.tally.Columns(v.order)}
	for i, src := range v.sources {
		info := src.Info()
		out.Inputs = append(out.Inputs, survey.Input{Path: info.Name, Format: info.Format, Bytes: info.Bytes, Rows: v.rows[i], Columns: len(src.Fields()), CRS: info.CRS})
		out.Rows += v.rows[i]
	}
	if refusal != nil {
		out.Map.Refusal = strings.Join(strings.Fields(refusal.Error()), " ")
	}
	if v.in.x != "" {
		out.Coordinates = &survey.Coordinates{X: v.in.x, Y: v.in.y, CRS: v.in.inputName}
		v.tally.Judge(out.Coordinates, bandwidth.TieLimit(2), v.settings.Places)
	}
	return out
}

// outlook counts as map does what it would set aside.
func (v *surveying) outlook(ctx context.Context, out *survey.Report, w *pool) error {
	set := *v.settings
	set.WorkCRS = "auto"
	if err := v.in.choosePlane(ctx, &set, v.sources, w); err != nil {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		out.Map.Refusal = err.Error()
		return nil
	}
	r := &run{settings: &set, sources: v.sources}
	counted, err := v.in.count(ctx, v.sources, w, r.tallyOptions(v.in))
	if err != nil {
		return err
	}
	out.Map.Account, out.Map.Plane = &counted.account, v.in.plane.CRS().Name
	if counted.account.Used == 0 {
		out.Map.Refusal = fmt.Sprintf("%s: %s", ErrNoEvents, reasonsText(counted.account))
		return nil
	}
	counted.tally.TrimStrays()
	out.Map.OutsideExtent = counted.tally.Outside()
	if n := counted.tally.Events(); n < leastEvents {
		out.Map.Refusal = fmt.Sprintf("%d events are too few for a map", n)
	}
	return nil
}
