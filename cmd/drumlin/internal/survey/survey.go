// Package survey says what is in an extract before anyone maps it.
//
// Every row is read once. Held are, for each worker, a few numbers a column, at
// most 1,000 texts a column, at most 524,288 distinct positions (about 30 MB)
// and a table of 65,536 counts. With more positions than that, one in 2, 4, 8,
// ... of them is kept, chosen by a hash, and what rests on them is called an
// estimate.
package survey

import (
	"math"

	"drumlin/io/events"
)

// Tally gathers what one worker reads. It is not safe for sharing.
type Tally struct {
	names   []string
	columns map[string]*column
	places  *positions
	account events.Account
	island  int64
	marks   [len(sentinels)]int64
	swapped int64 // rows that would be degrees with x and y changed over, and only so
	pairs   int64 // rows with two finite coordinates
	x0, x1  float64
	y0, y1  float64
}

// sentinels are numbers that stand for "unknown" in many extracts; small ones
// count only where both coordinates have them.
var sentinels = [...]float64{-1, -9, -99, -999, -9999, -99999, 99, 999, 9999, 99999, 999999, 9999999, 1e20, -1e20, 1e30, -1e30, -math.MaxFloat64, math.MaxFloat64, math.MinInt32, math.MaxInt32}

// NewTally starts an empty tally for the columns.
func NewTally() *Tally {
	inf := math.Inf(1)
	return &Tally{columns: map[string]*column{}, places: newPositions(), x0: inf, y0: inf, x1: -inf, y1: -inf}
}

// AddColumn takes in one column of a batch; nil values only note the field.
func (t *Tally) AddColumn(f events.Field, values []float64, words []string) {
	c := t.columns[f.Name]
	if c == nil {
		c = newColumn(f)
		t.columns[f.Name] = c
		t.names = append(t.names, f.Name)
	}
	c.mixed = c.mixed || c.differs(f)
	c.add(values, words)
}

// AddPairs takes in the coordinates of rows that pass the filter, before and
// after the screen: x and y are changed by it. Rows that were filtered are in
// the account already.
func (t *Tally) AddPairs(x, y []float64, screen events.Screen) {
	for i, u := range x {
		v := y[i]
		if u-u != 0 || v-v != 0 { // a NaN or an infinity
			continue
		}
		t.pairs++
		t.x0, t.x1, t.y0, t.y1 = min(t.x0, u), max(t.x1, u), min(t.y0, v), max(t.y1, v)
		if u == 0 && v == 0 {
			t.island++
			continue
		}
		if math.Abs(v) > 90 && math.Abs(v) <= 180 && math.Abs(u) <= 90 {
			t.swapped++
		}
		if u != math.Trunc(u) && v != math.Trunc(v) {
			continue
		}
		for k, s := range sentinels {
			if u == s && v == s || (u == s || v == s) && math.Abs(s) > 360 {
				t.marks[k]++
				break
			}
		}
	}
	n := screen.Apply(events.Batch{Columns: [][]float64{x, y}}, &t.account)
	t.places.add(x[:n], y[:n])
}

// Account is what became of the rows so far.
func (t *Tally) Account() *events.Account { return &t.account }

// Merge takes in what another worker gathered.
func (t *Tally) Merge(o *Tally) {
	for _, name := range o.names {
		if c := t.columns[name]; c != nil {
			c.merge(o.columns[name])
			continue
		}
		t.columns[name] = o.columns[name]
		t.names = append(t.names, name)
	}
	t.places.merge(o.places)
	t.account.Add(o.account)
	t.island += o.island
	t.swapped += o.swapped
	t.pairs += o.pairs
	for i, n := range o.marks {
		t.marks[i] += n
	}
	t.x0, t.x1, t.y0, t.y1 = min(t.x0, o.x0), max(t.x1, o.x1), min(t.y0, o.y0), max(t.y1, o.y1)
}

// Columns describes the columns in the order given.
func (t *Tally) Columns(order []string) []Column {
	var out []Column
	for _, name := range order {
		if c := t.columns[name]; c != nil {
			out = append(out, c.describe())
		}
	}
	return out
}
