package cql2

import (
	"drumlin/io/events"
)

// Truth is what a filter says of a row.
type Truth uint8

// In this order AND is the least and OR the greatest.
const (
	False Truth = iota
	Unknown
	True
)

func of(b bool) Truth {
	if b {
		return True
	}
	return False
}

// Program applies a filter to the batches of one input. It is immutable and
// safe for sharing; each goroutine brings its own Scratch.
type Program struct {
	root    node
	columns []string
	nodes   int
	words   int
}

// Scratch is the memory of one goroutine. The zero value is ready.
type Scratch struct {
	out   []Truth
	nodes [][]Truth
	words [][]uint8
}

// run is one evaluation.
type run struct {
	b     events.Batch
	first int // column of the batch that is the filter's first
	s     *Scratch
}

// node is a bound part of a filter.
type node interface {
	// eval fills dst with what the part says of every row.
	eval(r *run, dst []Truth)
	// may returns which answers some row could get.
	may(stat func(column string) (events.Stat, bool)) answers
}

// Columns returns the columns in the order in which Eval expects them.
func (p *Program) Columns() []string { return append([]string(nil), p.columns...) }

// Eval says for every row of the batch whether it passes; the filter's columns
// are those from first on. The result is in the scratch.
func (p *Program) Eval(b events.Batch, first int, s *Scratch) []Truth {
	n := b.Len()
	if cap(s.out) < n {
		s.out = make([]Truth, n)
	}
	for len(s.nodes) < p.nodes {
		s.nodes = append(s.nodes, nil)
	}
	for len(s.words) < p.words {
		s.words = append(s.words, nil)
	}
	s.out = s.out[:n]
	p.root.eval(&run{b, first, s}, s.out)
	return s.out
}

func (r *run) col(i int) []float64 { return r.b.Columns[r.first+i] }

func (r *run) list(i int) []string { return r.b.WordsOf(r.first + i) }

type constant Truth

func (c constant) eval(_ *run, dst []Truth) {
	for i := range dst {
		dst[i] = Truth(c)
	}
}

type not struct{ of node }

func (n not) eval(r *run, dst []Truth) {
	n.of.eval(r, dst)
	for i, t := range dst {
		dst[i] = True - t
	}
}

type join struct {
	or   bool
	slot int
	args []node
}

func (j join) eval(r *run, dst []Truth) {
	j.args[0].eval(r, dst)
	own := r.s.nodes[j.slot]
	if cap(own) < len(dst) {
		own = make([]Truth, len(dst))
		r.s.nodes[j.slot] = own
	}
	own = own[:len(dst)]
	for _, a := range j.args[1:] {
		a.eval(r, own)
		if j.or {
			for i, t := range own {
				dst[i] = max(dst[i], t)
			}
		} else {
			for i, t := range own {
				dst[i] = min(dst[i], t)
			}
		}
	}
}

type isNull struct {
	column int
	name   string
}

func (n isNull) eval(r *run, dst []Truth) {
	for i, v := range r.col(n.column) {
		dst[i] = of(events.IsNull(v))
	}
}

// verdict holds the answers of a comparison to less, equal and greater.
type sides struct{ less, equal, greater Truth }

func verdict(op string) sides {
	switch op {
	case "=":
		return sides{False, True, False}
	case "<>":
		return sides{True, False, True}
	case "<":
		return sides{True, False, False}
	case "<=":
		return sides{True, True, False}
	case ">":
		return sides{False, False, True}
	}
	return sides{False, True, True}
}

func (s sides) of(sign int) Truth {
	switch {
	case sign < 0:
		return s.less
	case sign > 0:
		return s.greater
	}
	return s.equal
}

func (s sides) compare(a, b float64) Truth {
	switch {
	case a < b:
		return s.less
	case a > b:
		return s.greater
	case a == b:
		return s.equal
	}
	return Unknown // a NaN: absent, no number, or not a number in the data
}

// test compares a column with a value.
type test struct {
	column int
	name   string
	sides
	value float64
}

func (t test) eval(r *run, dst []Truth) {
	for i, v := range r.col(t.column) {
		dst[i] = t.compare(v, t.value)
	}
}

// pair compares two columns.
type pair struct {
	left, right int
	sides
}

func (p pair) eval(r *run, dst []Truth) {
	right := r.col(p.right)
	for i, v := range r.col(p.left) {
		dst[i] = p.compare(v, right[i])
	}
}

// set looks a value up.
type set struct {
	column int
	name   string
	values map[float64]bool
}

func (s set) eval(r *run, dst []Truth) {
	for i, v := range r.col(s.column) {
		if v != v {
			dst[i] = Unknown
		} else {
			dst[i] = of(s.values[v])
		}
	}
}

// wordTest judges a column of text, each word of a batch once.
type wordTest struct {
	column int
	name   string
	cache  int
	judge  func(string) Truth
}

func (t wordTest) eval(r *run, dst []Truth) {
	words := r.list(t.column)
	known := r.s.words[t.cache]
	if cap(known) < len(words) {
		known = make([]uint8, len(words), len(words)+len(words)/4)
		r.s.words[t.cache] = known
	}
	known = known[:len(words)]
	clear(known)
	for i, v := range r.col(t.column) {
		if v != v {
			dst[i] = Unknown
			continue
		}
		at := int(v)
		if known[at] == 0 {
			known[at] = uint8(t.judge(words[at])) + 1
		}
		dst[i] = Truth(known[at] - 1)
	}
}

// wordPair compares two columns of text.
type wordPair struct {
	left, right int
	sides
}

func (p wordPair) eval(r *run, dst []Truth) {
	lw, rw := r.list(p.left), r.list(p.right)
	right := r.col(p.right)
	for i, v := range r.col(p.left) {
		u := right[i]
		switch {
		case v != v || u != u:
			dst[i] = Unknown
		case lw[int(v)] < rw[int(u)]:
			dst[i] = p.less
		case lw[int(v)] > rw[int(u)]:
			dst[i] = p.greater
		default:
			dst[i] = p.equal
		}
	}
}
