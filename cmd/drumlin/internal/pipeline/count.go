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
// first error by part order wins, so the same fault is reported every time.
func (w *pool) each(ctx context.Context, sources []events.Source, columns []string, visit func(worker, file int, b events.Batch) error) error {
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

// extent is the least and greatest raw value of the x and y columns, rows that
// will be set aside among them and NaN not, as a file's statistics have it.
type extent struct{ lo, hi [2]float64 }

func noExtent() extent {
	inf := math.Inf(1)
	return extent{[2]float64{inf, inf}, [2]float64{-inf, -inf}}
}

func (e *extent) add(axis int, lo, hi float64) {
	e.lo[axis], e.hi[axis] = min(e.lo[axis], lo), max(e.hi[axis], hi)
}

// stated is the extent from the files' own statistics, false where one lacks them.
func (r *reading) stated(sources []events.Source) (extent, bool) {
	e := noExtent()
	for _, src := range sources {
		for axis, c := range []string{r.x, r.y} {
			lo, hi, ok := src.Bounds(c)
			if !ok {
				return e, false
			}
			e.add(axis, lo, hi)
		}
	}
	return e, true
}

// firstLook is what a first pass over the coordinates finds.
type firstLook struct {
	counter spatial.CentreCounter
	account events.Account
	extent  extent
}

// look is the first pass over coordinates: for the centre where it is wanted,
// and for the extent.
func (r *reading) look(ctx context.Context, sources []events.Source, w *pool, centre bool) (*firstLook, error) {
	w.report.Stage("finding the centre")
	looks := make([]firstLook, max(1, w.workers))
	for i := range looks {
		looks[i].extent = noExtent()
	}
	screen := r.screen()
	screen.Weighted = false
	err := w.each(ctx, sources, []string{r.x, r.y}, func(worker, _ int, b events.Batch) error {
		l := &looks[worker]
		for axis := range 2 {
			for _, v := range b.Columns[axis] {
				if v == v {
					l.extent.add(axis, v, v)
				}
			}
		}
		n := screen.Apply(b, &l.account)
		if !centre {
			return nil
		}
		p := spatial.LonLats{Lon: b.Columns[0][:n], Lat: b.Columns[1][:n]}
		if r.reproject || !r.input.Geographic {
			p = r.input.Projection.Inverse(spatial.XYs{X: p.Lon, Y: p.Lat})
		}
		l.counter.Add(p)
		return nil
	})
	if err != nil {
		return nil, err
	}
	out := &looks[0]
	for i := range looks[1:] {
		l := &looks[i+1]
		out.counter.Merge(&l.counter)
		out.account.Add(l.account)
		for axis := range 2 {
			out.extent.add(axis, l.extent.lo[axis], l.extent.hi[axis])
		}
	}
	return out, nil
}

// tallied is the outcome of a pass over the events.
type tallied struct {
	tally   *mv.Tally
	account events.Account
	perFile []int64 // rows read of each source
}

// count makes the tally in one parallel pass.
func (r *reading) count(ctx context.Context, sources []events.Source, w *pool, opt mv.TallyOptions) (*tallied, error) {
	w.report.Stage("reading")
	opt.Weighted = r.weight != ""
	type state struct {
		tally   *mv.Tally
		account events.Account
		perFile []int64
	}
	states := make([]state, max(1, w.workers))
	for i := range states {
		t, err := mv.NewTally(opt)
		if err != nil {
			return nil, err
		}
		states[i] = state{tally: t, perFile: make([]int64, len(sources))}
	}
	screen := r.screen()
	err := w.each(ctx, sources, r.columns(), func(worker, file int, b events.Batch) error {
		s := &states[worker]
		s.perFile[file] += int64(b.Len())
		n := screen.Apply(b, &s.account)
		var weights []float64
		if screen.Weighted {
			weights = b.Columns[2][:n]
		}
		p := r.project(b.Columns[0][:n], b.Columns[1][:n])
		if r.input.Geographic || r.reproject {
			p.X, p.Y, weights = dropOutside(p.X, p.Y, weights, &s.account)
		}
		if r.area != nil {
			p.X, p.Y, weights = r.area.drop(p.X, p.Y, weights, &s.account)
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
