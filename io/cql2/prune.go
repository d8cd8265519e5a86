package cql2

import "drumlin/io/events"

// answers is a set of Truth, one bit each.
type answers uint8

const everyAnswer answers = 1<<False | 1<<Unknown | 1<<True

func one(t Truth) answers { return 1 << t }

// None reports whether no row of a part can pass, by what the input states of
// its columns. What is not stated, and NaN, which statistics leave out, never
// makes it true.
func (p *Program) None(stat func(column string) (events.Stat, bool)) bool {
	return p.root.may(stat)&one(True) == 0
}

// All reports whether every row of a part passes.
func (p *Program) All(stat func(column string) (events.Stat, bool)) bool {
	return p.root.may(stat) == one(True)
}

func (c constant) may(func(string) (events.Stat, bool)) answers { return one(Truth(c)) }

func (n not) may(stat func(string) (events.Stat, bool)) answers {
	var out answers
	a := n.of.may(stat)
	for _, t := range []Truth{False, Unknown, True} {
		if a&one(t) != 0 {
			out |= one(True - t)
		}
	}
	return out
}

func (j join) may(stat func(string) (events.Stat, bool)) answers {
	out := j.args[0].may(stat)
	for _, arg := range j.args[1:] {
		b := arg.may(stat)
		var both answers
		for _, t := range []Truth{False, Unknown, True} {
			for _, u := range []Truth{False, Unknown, True} {
				switch {
				case out&one(t) == 0 || b&one(u) == 0:
				case j.or:
					both |= one(max(t, u))
				default:
					both |= one(min(t, u))
				}
			}
		}
		out = both
	}
	return out
}

func (n isNull) may(stat func(string) (events.Stat, bool)) answers {
	st, ok := stat(n.name)
	switch {
	case !ok:
		return everyAnswer
	case st.Words != nil && len(st.Words) == 0, st.Words == nil && st.Lo > st.Hi:
		return one(True)
	case st.Nulls == 0:
		return one(False)
	}
	return one(True) | one(False)
}

func (t test) may(stat func(string) (events.Stat, bool)) answers {
	st, ok := stat(t.name)
	if !ok || st.Words != nil {
		return everyAnswer
	}
	out := one(Unknown) // a null, or a NaN outside the range
	if st.Lo > st.Hi {
		return out
	}
	if st.Lo < t.value {
		out |= one(t.less)
	}
	if st.Hi > t.value {
		out |= one(t.greater)
	}
	if st.Lo <= t.value && t.value <= st.Hi {
		out |= one(t.equal)
	}
	return out
}

func (s set) may(stat func(string) (events.Stat, bool)) answers {
	st, ok := stat(s.name)
	if !ok || st.Words != nil {
		return everyAnswer
	}
	out := one(Unknown)
	if st.Lo > st.Hi {
		return out
	}
	for v := range s.values {
		if st.Lo <= v && v <= st.Hi {
			return everyAnswer
		}
	}
	return out | one(False)
}

func (pair) may(func(string) (events.Stat, bool)) answers { return everyAnswer }

func (wordPair) may(func(string) (events.Stat, bool)) answers { return everyAnswer }

func (t wordTest) may(stat func(string) (events.Stat, bool)) answers {
	st, ok := stat(t.name)
	if !ok || st.Words == nil {
		return everyAnswer
	}
	var out answers
	for _, w := range st.Words {
		out |= one(t.judge(w))
	}
	if st.Nulls != 0 || len(st.Words) == 0 {
		out |= one(Unknown)
	}
	return out
}
