package pipeline

import (
	"context"
	"errors"
	"fmt"
	"math"
	"sync"
	"sync/atomic"

	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/io/events"
	"drumlin/io/record"
	"drumlin/mv"
	"drumlin/spatial"
)

// ErrNoEvents: nothing usable was read.
var ErrNoEvents = errors.New("no row can be mapped")

// pool runs a function over all parts of all sources.
type pool struct {
	workers int
	report  *progress.Reporter
}

// part is an independently readable piece of one source.
type part struct {
	source events.Source
	file   int // position of the source
	index  int // of the part within it
}

// each reads the columns of every part, split over the workers. visit gets the
// worker's number, so that it can keep state of its own without locks. The
// first error by part order wins, so the same fault is reported every time. skip,
// if not nil, returns the rows of a part that need not be read.
func (w *pool) each(ctx context.Context, sources []events.Source, columns []string, skip func(worker int, p part) int64, visit func(worker, file int, b events.Batch) error) error {
	var parts []part
	for i, s := range sources {
		for k := range s.Parts() {
			parts = append(parts, part{s, i, k})
		}
	}
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	var next atomic.Int64
	fails := make([]error, len(parts))
	var wg sync.WaitGroup
	for worker := range max(1, min(w.workers, len(parts))) {
		wg.Go(func() {
			for {
				i := int(next.Add(1)) - 1
				if i >= len(parts) || ctx.Err() != nil {
					return
				}
				p := parts[i]
				if skip != nil {
					if n := skip(worker, p); n > 0 {
						w.report.Rows(n)
						continue
					}
				}
				err := p.source.Read(ctx, p.index, columns, func(b events.Batch) error {
					w.report.Rows(int64(b.Len()))
					return visit(worker, p.file, b)
				})
				if err != nil {
					fails[i] = err
					cancel()
				}
			}
		})
	}
	wg.Wait()
	var first error
	for _, err := range fails {
		if err != nil && (first == nil || errors.Is(first, context.Canceled)) {
			first = err
		}
	}
	return first
}

// countCentre is the first pass over coordinates that finds the centre; the
// account says what became of the rows.
func (r *reading) countCentre(ctx context.Context, sources []events.Source, w *pool) (*spatial.CentreCounter, events.Account, error) {
	w.report.Stage("finding the centre")
	counters := make([]spatial.CentreCounter, max(1, w.workers))
	accounts := make([]events.Account, len(counters))
	pickers := make([]picker, len(counters))
	for i := range pickers {
		pickers[i].pick = r.pick
	}
	skip := func(worker int, p part) int64 {
		return pickers[worker].skip(p.source, p.file, p.index, &accounts[worker])
	}
	screen := r.screen()
	screen.Weighted = false
	err := w.each(ctx, sources, append([]string{r.x, r.y}, r.pick.columns()...), skip, func(worker, file int, b events.Batch) error {
		b = pickers[worker].apply(file, b, 2, &accounts[worker])
		n := screen.Apply(b, &accounts[worker])
		p := spatial.LonLats{Lon: b.Columns[0][:n], Lat: b.Columns[1][:n]}
		if r.reproject || !r.input.Geographic {
			p = r.input.Projection.Inverse(spatial.XYs{X: p.Lon, Y: p.Lat})
		}
		counters[worker].Add(p)
		return nil
	})
	if err != nil {
		return nil, events.Account{}, err
	}
	for i := range counters[1:] {
		counters[0].Merge(&counters[i+1])
		accounts[0].Add(accounts[i+1])
	}
	return &counters[0], accounts[0], nil
}

// tallied is the outcome of a pass over the events.
type tallied struct {
	tally   *mv.Tally
	account events.Account
	perFile []int64 // rows read of each source
	period  *record.Period
}

// count makes the tally in one parallel pass.
func (r *reading) count(ctx context.Context, sources []events.Source, w *pool, opt mv.TallyOptions) (*tallied, error) {
	w.report.Stage("reading")
	opt.Weighted = r.weight != ""
	type state struct {
		tally   *mv.Tally
		account events.Account
		perFile []int64
		picker  picker
	}
	states := make([]state, max(1, w.workers))
	for i := range states {
		t, err := mv.NewTally(opt)
		if err != nil {
			return nil, err
		}
		states[i] = state{tally: t, perFile: make([]int64, len(sources)), picker: picker{pick: r.pick}}
	}
	screen := r.screen()
	own := len(r.columns())
	skip := func(worker int, p part) int64 {
		s := &states[worker]
		n := s.picker.skip(p.source, p.file, p.index, &s.account)
		s.perFile[p.file] += n
		return n
	}
	err := w.each(ctx, sources, append(r.columns(), r.pick.columns()...), skip, func(worker, file int, b events.Batch) error {
		s := &states[worker]
		s.perFile[file] += int64(b.Len())
		b = s.picker.apply(file, b, own, &s.account)
		n := screen.Apply(b, &s.account)
		s.picker.note(file, b, n)
		var weights []float64
		if screen.Weighted {
			weights = b.Columns[2][:n]
		}
		p := r.project(b.Columns[0][:n], b.Columns[1][:n])
		if r.input.Geographic || r.reproject {
			p.X, p.Y, weights = dropOutside(p.X, p.Y, weights, &s.account)
		}
		return s.tally.Add(p.X, p.Y, weights)
	})
	if err != nil {
		return nil, err
	}
	out := &tallied{tally: states[0].tally, account: states[0].account, perFile: states[0].perFile}
	for i := range states[1:] {
		s := &states[i+1]
		if err := out.tally.Merge(s.tally); err != nil {
			return nil, err
		}
		s.tally = nil
		out.account.Add(s.account)
		for k, n := range s.perFile {
			out.perFile[k] += n
		}
	}
	for i := range states[1:] {
		states[0].picker.utc.merge(states[i+1].picker.utc)
		states[0].picker.wall.merge(states[i+1].picker.wall)
	}
	out.period = states[0].picker.period()
	if !out.account.Balanced() {
		return nil, fmt.Errorf("row account does not balance: %d read, %d used, %d set aside", out.account.Read, out.account.Used, out.account.SetAsideTotal())
	}
	return out, nil
}

// dropOutside takes out positions that the projection could not place.
func dropOutside(x, y, w []float64, a *events.Account) (x2, y2, w2 []float64) {
	bad := 0
	for i := range x {
		if math.IsNaN(x[i]) {
			bad++
		}
	}
	if bad == 0 {
		return x, y, w
	}
	k := 0
	for i := range x {
		if !math.IsNaN(x[i]) {
			x[k], y[k] = x[i], y[i]
			if w != nil {
				w[k] = w[i]
			}
			k++
		}
	}
	a.Withdraw(events.OutsideProjection, int64(bad))
	if w != nil {
		w = w[:k]
	}
	return x[:k], y[:k], w
}
