package cql2

import (
	"cmp"
	"fmt"
	"time"
	"unicode/utf8"

	"drumlin/io/events"
)

func isTimeText(s string) bool {
	_, _, ok := events.ParseTime(s)
	return ok
}

// valueKind is what is compared.
type valueKind uint8

const (
	number valueKind = iota
	text
	truthValue
	instant
	wallClock
	anyTime // a literal, good for both
)

var kindNames = [...]string{"a number", "text", "true or false", "a time", "a time without a zone", "a time"}

// Bind checks the filter against the columns of an input and returns what
// applies it. Times without an offset are of the zone. Errors are
// *events.Fault with an empty File: ErrSetting for a column that is not there
// or a comparison that cannot be made, ErrUnsupported for a column that cannot
// be read.
func (f *Filter) Bind(fields []events.Field, zone *time.Location) (*Program, error) {
	b := &binder{filter: f, zone: zone, at: map[string]int{}, kinds: map[string]valueKind{}}
	for i, name := range f.columns {
		if err := events.CheckReadable(name, fields); err != nil {
			return nil, err
		}
		field, _ := events.FindField(name, fields) // it is there
		b.at[name] = i
		switch field.Class {
		case events.Text:
			b.kinds[name] = text
		case events.Instant:
			b.kinds[name] = instant
		case events.WallClock:
			b.kinds[name] = wallClock
		case events.Truth:
			b.kinds[name] = truthValue
		default:
			b.kinds[name] = number
		}
	}
	root, err := b.expr(f.root)
	if err != nil {
		return nil, err
	}
	return &Program{root: root, columns: f.Columns(), nodes: b.nodes, words: b.words}, nil
}

type binder struct {
	filter *Filter
	zone   *time.Location
	at     map[string]int
	kinds  map[string]valueKind
	nodes  int // scratch columns
	words  int // word caches
}

func (b *binder) fail(at int, format string, a ...any) error {
	n := utf8.RuneCountInString(b.filter.text[:min(at, len(b.filter.text))]) + 1
	return &events.Fault{Kind: events.ErrSetting, Where: fmt.Sprintf("filter, at character %d", n), What: fmt.Sprintf(format, a...)}
}

func (b *binder) slot() int { b.nodes++; return b.nodes - 1 }

func (b *binder) kind(o operand) valueKind {
	switch o.kind {
	case isNumber:
		return number
	case isText:
		return text
	case isTruth:
		return truthValue
	case isTime:
		return anyTime
	}
	return b.kinds[o.text]
}

func (b *binder) expr(e expr) (node, error) {
	switch e := e.(type) {
	case truth:
		return constant(of(bool(e))), nil
	case negated:
		n, err := b.expr(e.of)
		return not{n}, err
	case joined:
		j := join{or: e.or, slot: b.slot()}
		for _, a := range e.args {
			n, err := b.expr(a)
			if err != nil {
				return nil, err
			}
			j.args = append(j.args, n)
		}
		return j, nil
	case absent:
		if e.of.kind != isColumn {
			return constant(False), nil
		}
		return isNull{b.at[e.of.text], e.of.text}, nil
	case liked:
		if b.kind(e.of) != text || e.of.kind != isColumn {
			return nil, b.fail(e.of.at, "LIKE needs a column of text, and %s is %s", e.of, kindNames[b.kind(e.of)])
		}
		return b.wordTest(e.of, func(s string) Truth { return of(like(s, e.pattern)) }), nil
	case listed:
		return b.in(e)
	case compared:
		return b.compare(e)
	}
	panic("cql2: unknown part of a filter")
}

var flipped = map[string]string{"=": "=", "<>": "<>", "<": ">", "<=": ">=", ">": "<", ">=": "<="}

func (b *binder) compare(c compared) (node, error) {
	l, r := c.left, c.right
	if l.kind != isColumn && r.kind == isColumn {
		l, r, c.op = r, l, flipped[c.op]
	}
	lk, rk := b.kind(l), b.kind(r)
	timely := (lk == instant || lk == wallClock || lk == text) && rk == anyTime
	if lk != rk && !timely || lk == truthValue && c.op != "=" && c.op != "<>" {
		return nil, b.mismatch(c.op, l, r)
	}
	switch {
	case l.kind != isColumn:
		return nil, b.fail(l.at, "two values are compared, %s and %s; name a column", l, r)
	case r.kind == isColumn && lk == text:
		return wordPair{b.at[l.text], b.at[r.text], verdict(c.op)}, nil
	case r.kind == isColumn:
		return pair{b.at[l.text], b.at[r.text], verdict(c.op)}, nil
	case lk == text && rk == anyTime:
		m, _ := events.ParseMoment(r.text, b.zone) // the parser has read it
		v := verdict(c.op)
		return b.wordTest(l, func(s string) Truth {
			if sign, ok := m.Compare(s); ok {
				return v.of(sign)
			}
			return Unknown
		}), nil
	case lk == text:
		v := verdict(c.op)
		return b.wordTest(l, func(s string) Truth { return v.of(cmp.Compare(s, r.text)) }), nil
	}
	return test{b.at[l.text], l.text, verdict(c.op), b.value(lk, r)}, nil
}

func (b *binder) mismatch(op string, l, r operand) error {
	what := func(o operand) string {
		if o.kind == isColumn {
			return "column " + o.text + " holds " + kindNames[b.kind(o)]
		}
		return o.String() + " is " + kindNames[b.kind(o)]
	}
	return b.fail(r.at, "%s cannot be compared by %s: %s", what(l), op, what(r))
}

// value returns a literal on the scale of a column.
func (b *binder) value(kind valueKind, o operand) float64 {
	if o.kind != isTime {
		return o.num
	}
	m, _ := events.ParseMoment(o.text, b.zone) // the parser has read it
	if kind == instant {
		return m.UTC
	}
	return m.Wall
}

func (b *binder) in(l listed) (node, error) {
	if l.of.kind != isColumn {
		return nil, b.fail(l.of.at, "IN needs a column before it, not %s", l.of)
	}
	k := b.kind(l.of)
	texts := map[string]bool{}
	var moments []events.Moment
	s := set{column: b.at[l.of.text], name: l.of.text, values: map[float64]bool{}}
	for _, v := range l.list {
		switch vk := b.kind(v); {
		case k == text && vk == text:
			texts[v.text] = true
		case k == text && vk == anyTime:
			m, _ := events.ParseMoment(v.text, b.zone)
			moments = append(moments, m)
		case k == vk, (k == instant || k == wallClock) && vk == anyTime:
			s.values[b.value(k, v)] = true
		default:
			return nil, b.mismatch("IN", l.of, v)
		}
	}
	if k != text {
		return s, nil
	}
	return b.wordTest(l.of, func(word string) Truth {
		out := of(texts[word])
		for _, m := range moments {
			if sign, ok := m.Compare(word); ok && sign == 0 {
				return True
			} else if !ok && len(texts) == 0 {
				return Unknown
			}
		}
		return out
	}), nil
}

func (b *binder) wordTest(o operand, f func(string) Truth) node {
	b.words++
	return wordTest{b.at[o.text], o.text, b.words - 1, f}
}

// like matches % and _, letter by letter; \ takes the next letter as it is.
func like(s, pattern string) bool {
	star, mark := -1, 0 // where to go on after a mismatch
	i, p := 0, 0
	for i < len(s) {
		r, n := utf8.DecodeRuneInString(s[i:])
		if p < len(pattern) {
			q, m := utf8.DecodeRuneInString(pattern[p:])
			escaped := q == '\\' && p+m < len(pattern)
			if escaped {
				e, k := utf8.DecodeRuneInString(pattern[p+m:])
				q, m = e, m+k
			}
			switch {
			case !escaped && q == '%':
				star, mark = p+m, i
				p += m
				continue
			case q == r || !escaped && q == '_':
				i, p = i+n, p+m
				continue
			}
		}
		if star < 0 {
			return false
		}
		_, n = utf8.DecodeRuneInString(s[mark:])
		mark += n
		i, p = mark, star
	}
	for p < len(pattern) && pattern[p] == '%' {
		p++
	}
	return p == len(pattern)
}
