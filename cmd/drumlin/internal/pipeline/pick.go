package pipeline

import (
	"context"
	"fmt"
	"math"
	"slices"
	"time"
	_ "time/tzdata" // time zones by name, wherever the program runs

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/io/cql2"
	"drumlin/io/events"
	"drumlin/io/record"
)

// pick says which rows are looked at: those that pass the row filter and lie
// within the time window. Its columns follow the others of a batch: those of
// the filter, then the time. A nil pick takes every row.
type pick struct {
	where    *cql2.Filter // nil: none
	when     string       // column of times, "" if none
	zone     *time.Location
	from     events.Moment // -Inf where there is no start
	until    events.Moment // +Inf where there is no end
	programs []*cql2.Program
	classes  []events.Class // of the time, by source
}

// newPick reads the settings and checks them against the sources.
func newPick(s *config.Settings, sources []events.Source) (*pick, error) {
	if s.Where == "" && s.Time == "" {
		return nil, nil
	}
	fault := func(what, remedy string) error {
		return &events.Fault{Kind: events.ErrSetting, What: what, Remedy: remedy}
	}
	p := &pick{when: s.Time, from: events.Moment{UTC: math.Inf(-1), Wall: math.Inf(-1)}, until: events.Moment{UTC: math.Inf(1), Wall: math.Inf(1)}}
	var err error
	if p.zone, err = time.LoadLocation(s.Zone); err != nil || s.Zone == "Local" {
		return nil, fault(fmt.Sprintf("--zone: there is no time zone %q", s.Zone), "give a name such as Europe/Berlin, or UTC")
	}
	for _, end := range []struct {
		name, text string
		to         *events.Moment
	}{{"from", s.From, &p.from}, {"until", s.Until, &p.until}} {
		if end.text == "" {
			continue
		}
		m, ok := events.ParseMoment(end.text, p.zone)
		if !ok {
			return nil, fault(fmt.Sprintf("--%s %q is no time", end.name, end.text), "write 2025-03-01 or 2025-03-01T12:30:00+01:00")
		}
		*end.to = m
	}
	if p.from.UTC >= p.until.UTC {
		return nil, fault(fmt.Sprintf("the time window from %s until %s is empty", s.From, s.Until), "put the earlier time first; the end is not part of the window")
	}
	if s.Where != "" {
		if p.where, err = cql2.Parse(s.Where); err != nil {
			return nil, fault("--where: "+err.Error(), "")
		}
	}
	for _, src := range sources {
		if err := p.bind(src); err != nil {
			return nil, inFile(err, src)
		}
	}
	return p, nil
}

// bind checks the filter and the time against one source.
func (p *pick) bind(src events.Source) error {
	fields := src.Fields()
	var prog *cql2.Program
	var err error
	if p.where != nil {
		if prog, err = p.where.Bind(fields, p.zone); err != nil {
			return err
		}
	}
	p.programs = append(p.programs, prog)
	var class events.Class
	if p.when != "" {
		f, err := events.FindField(p.when, fields)
		if err != nil {
			return err
		}
		switch class = f.Class; class {
		case events.Text, events.Instant, events.WallClock:
		default:
			return &events.Fault{Kind: events.ErrUnsupported, What: fmt.Sprintf("column %q is %s, not times", p.when, f.Type), Remedy: "name a column of timestamps, dates, or text such as 2025-03-01T12:30:00Z"}
		}
	}
	p.classes = append(p.classes, class)
	return nil
}

// columns lists what the pick needs beside the others.
func (p *pick) columns() []string {
	if p == nil {
		return nil
	}
	var out []string
	if p.where != nil {
		out = p.where.Columns()
	}
	if p.when != "" {
		out = append(out, p.when)
	}
	return out
}

// picker is a pick with the memory of one worker.
type picker struct {
	*pick
	scratch cql2.Scratch
	times   []float64 // of the words of a batch, NaN where not looked at
	utc     span      // of instants, and of wall clocks below
	wall    span
}

// rows runs visit over the rows that the pick takes, of all parts of all
// sources: as pool.each does, with the columns asked for at the front of the
// batch. The rows left out are counted in the worker's account, all rows by file
// where it has such counts. The picker returned knows the times of all rows that
// visit noted.
func (r *reading) rows(ctx context.Context, sources []events.Source, w *pool, columns []string, counts func(worker int) (*events.Account, []int64),
	visit func(worker, file int, b events.Batch, k *picker) error) (*picker, error) {
	pickers := make([]picker, max(1, w.workers))
	for i := range pickers {
		pickers[i].pick = r.pick
	}
	count := func(worker, file int, n int64) *events.Account {
		a, perFile := counts(worker)
		if perFile != nil {
			perFile[file] += n
		}
		return a
	}
	skip := func(worker int, p part) int64 {
		a, _ := counts(worker)
		n := pickers[worker].skip(p.source, p.file, p.index, a)
		count(worker, p.file, n)
		return n
	}
	all := append(slices.Clone(columns), r.pick.columns()...)
	err := w.each(ctx, sources, all, skip, func(worker, file int, b events.Batch) error {
		a := count(worker, file, int64(b.Len()))
		k := &pickers[worker]
		return visit(worker, file, k.apply(file, b, len(columns), a), k)
	})
	for i := range pickers[1:] {
		pickers[0].utc.merge(pickers[i+1].utc)
		pickers[0].wall.merge(pickers[i+1].wall)
	}
	return &pickers[0], err
}

// span is a least and greatest time; the zero value is empty.
type span struct {
	lo, hi float64
	some   bool
}

func (s *span) add(v []float64) {
	for _, t := range v {
		if !s.some {
			s.lo, s.hi, s.some = t, t, true
		}
		s.lo, s.hi = min(s.lo, t), max(s.hi, t)
	}
}

func (s *span) merge(o span) {
	if o.some {
		s.add([]float64{o.lo, o.hi})
	}
}

// skip reports that no row of a part needs to be read, by what the input states
// of it, and counts the rows under their reason. The outcome is the same as if
// they had been read.
func (k *picker) skip(src events.Source, file, part int, a *events.Account) (rows int64) {
	if k.pick == nil {
		return 0
	}
	if rows = src.PartRows(part); rows <= 0 {
		return 0
	}
	stat := func(column string) (events.Stat, bool) { return events.StatOf(src, part, column) }
	prog := k.programs[file]
	reason := events.Filtered
	switch {
	case prog != nil && prog.None(stat):
	case k.when == "" || prog != nil && !prog.All(stat):
		return 0
	default:
		st, ok := stat(k.when)
		from, until := k.window(k.classes[file])
		if !ok || k.classes[file] == events.Text || st.Nulls != 0 || st.Lo > st.Hi || !(st.Lo >= until || st.Hi < from) {
			return 0
		}
		reason = events.OutsideTimeWindow
	}
	a.Read += rows
	a.SetAside[reason] += rows
	return rows
}

// window returns the ends on the scale of a column; text has become UTC.
func (k *picker) window(c events.Class) (from, until float64) {
	if c == events.WallClock {
		return k.from.Wall, k.until.Wall
	}
	return k.from.UTC, k.until.UTC
}

// apply moves the rows that count to the front and returns the batch of them;
// the others are counted as read and set aside. first is the column of the
// batch that is the pick's first.
func (k *picker) apply(file int, b events.Batch, first int, a *events.Account) events.Batch {
	if k.pick == nil {
		return b
	}
	if prog := k.programs[file]; prog != nil {
		b = squeeze(b, prog.Eval(b, first, &k.scratch), events.Filtered, a)
		first += len(prog.Columns())
	}
	if k.when == "" || b.Len() == 0 {
		return b
	}
	t := b.Columns[first]
	if k.classes[file] == events.Text {
		k.readTimes(t, b.WordsOf(first))
	}
	from, until := k.window(k.classes[file])
	kept := make([]cql2.Truth, len(t))
	for i, v := range t {
		switch {
		case v != v:
			a.SetAside[events.TimeNull]++
		case v >= from && v < until:
			kept[i] = cql2.True
		default:
			a.SetAside[events.OutsideTimeWindow]++
		}
	}
	return squeeze(b, kept, noReason, a)
}

// readTimes puts instants in the place of words; what is no time becomes NaN.
func (k *picker) readTimes(t []float64, words []string) {
	k.times = k.times[:0]
	for range words {
		k.times = append(k.times, math.Inf(1))
	}
	for i, v := range t {
		if v != v {
			continue
		}
		at := int(v)
		if math.IsInf(k.times[at], 1) {
			k.times[at] = math.NaN()
			if m, ok := events.ParseMoment(words[at], k.zone); ok {
				k.times[at] = m.UTC
			}
		}
		t[i] = k.times[at]
	}
}

// note takes the times of rows that are used into the period.
func (k *picker) note(file int, b events.Batch, n int) {
	if k.pick == nil || k.when == "" || n == 0 {
		return
	}
	t := b.Columns[len(b.Columns)-1][:n]
	if k.classes[file] == events.WallClock {
		k.wall.add(t)
	} else {
		k.utc.add(t)
	}
}

// noReason leaves the count of reasons alone.
const noReason = events.Reason(255)

// squeeze keeps the rows that are true.
func squeeze(b events.Batch, rows []cql2.Truth, why events.Reason, a *events.Account) events.Batch {
	n := 0
	for _, r := range rows {
		if r == cql2.True {
			n++
		}
	}
	gone := int64(len(rows) - n)
	if gone == 0 {
		return b
	}
	a.Read += gone
	if why != noReason {
		a.SetAside[why] += gone
	}
	out := events.Batch{Columns: make([][]float64, len(b.Columns)), Words: b.Words}
	for c, v := range b.Columns {
		k := 0
		for i, r := range rows {
			if r == cql2.True {
				v[k] = v[i]
				k++
			}
		}
		out.Columns[c] = v[:k]
	}
	return out
}

const (
	microsPerSecond = 1e6
	secondsPerYear  = 365.2425 * 86400
)

// period says what time the events used are from: the window, and where it is
// open the first and last of them.
func (k *picker) period() *record.Period {
	if k.pick == nil || k.when == "" {
		return nil
	}
	all := k.utc
	if k.wall.some {
		for _, v := range []float64{k.wall.lo, k.wall.hi} {
			w := time.UnixMicro(int64(v)).UTC()
			t := time.Date(w.Year(), w.Month(), w.Day(), w.Hour(), w.Minute(), w.Second(), w.Nanosecond(), k.zone)
			all.add([]float64{float64(t.UnixMicro())})
		}
	}
	if !all.some {
		return nil
	}
	show := func(micros float64) string {
		return time.UnixMicro(int64(micros)).In(k.zone).Format("2006-01-02T15:04:05.999999Z07:00")
	}
	p := &record.Period{Column: k.when, Zone: k.zone.String(), First: show(all.lo), Last: show(all.hi)}
	lo, hi := all.lo, all.hi
	if !math.IsInf(k.from.UTC, 0) {
		p.From, lo = show(k.from.UTC), k.from.UTC
	}
	if !math.IsInf(k.until.UTC, 0) {
		p.Until, hi = show(k.until.UTC), k.until.UTC
	}
	p.Years = math.Round((hi-lo)/microsPerSecond/secondsPerYear*1e6) / 1e6
	return p
}
