package survey

import (
	"math"
	"time"

	"drumlin/io/events"
)

const (
	maxWords  = 1000 // distinct texts told apart
	tryTimes  = 100  // texts looked at to tell whether they are times
	isoMicros = "2006-01-02T15:04:05.999999"
)

// column gathers what a column holds.
type column struct {
	field         events.Field
	rows, nulls   int64
	notValues     int64
	nan, infinite int64
	lo, hi        float64
	words         map[string]bool
	many          bool // more than maxWords
	timely, tried int
	mixed         bool // another type in another file
}

func newColumn(f events.Field) *column {
	return &column{field: f, lo: math.Inf(1), hi: math.Inf(-1), words: map[string]bool{}}
}

func (c *column) add(v []float64, words []string) {
	c.rows += int64(len(v))
	if words != nil {
		c.addText(v, words)
		return
	}
	for _, x := range v {
		switch {
		case x == x && !math.IsInf(x, 0):
			c.lo, c.hi = min(c.lo, x), max(c.hi, x)
		case events.IsNull(x):
			c.nulls++
		case events.IsNotAValue(x) || events.IsOtherShape(x):
			c.notValues++
		case x != x:
			c.nan++
		default:
			c.infinite++
		}
	}
}

// differs reports that another field of the name holds something else.
func (c *column) differs(f events.Field) bool {
	return c.field.Class != f.Class || c.field.Numeric != f.Numeric
}

func (c *column) addText(v []float64, words []string) {
	for _, x := range v {
		if x != x {
			c.nulls++
			continue
		}
		if c.many {
			continue
		}
		w := words[int(x)]
		if c.words[w] {
			continue
		}
		if c.tried < tryTimes {
			c.tried++
			if _, _, ok := events.ParseTime(w); ok {
				c.timely++
			}
		}
		c.words[w] = true
		c.many = len(c.words) > maxWords
	}
}

func (c *column) merge(o *column) {
	c.rows += o.rows
	c.nulls += o.nulls
	c.notValues += o.notValues
	c.nan += o.nan
	c.infinite += o.infinite
	c.lo, c.hi = min(c.lo, o.lo), max(c.hi, o.hi)
	c.timely += o.timely
	c.tried += o.tried
	c.many = c.many || o.many
	c.mixed = c.mixed || o.mixed || c.differs(o.field)
	if c.many {
		return
	}
	for w := range o.words {
		c.words[w] = true
	}
	c.many = len(c.words) > maxWords
}

// describe returns the column for the report.
func (c *column) describe() Column {
	out := Column{Name: c.field.Name, Type: c.field.Type, Rows: c.rows, Nulls: c.nulls, NotAValue: c.notValues, NaN: c.nan, Infinite: c.infinite}
	if c.mixed {
		out.Note = "of another type in another file"
	}
	switch {
	case !c.field.Readable():
		out.Holds, out.Rows = "not read", 0
	case c.field.Class == events.Text:
		out.Holds = "text"
		n := len(c.words)
		out.Distinct, out.More = min(n, maxWords), c.many
		if c.tried > 0 && c.timely == c.tried {
			out.Holds = "times as text"
		}
	case c.field.Class == events.Instant || c.field.Class == events.WallClock:
		out.Holds = "times"
		if c.lo <= c.hi {
			suffix := ""
			if c.field.Class == events.Instant {
				suffix = "Z"
			}
			out.From = time.UnixMicro(int64(c.lo)).UTC().Format(isoMicros) + suffix
			out.To = time.UnixMicro(int64(c.hi)).UTC().Format(isoMicros) + suffix
		}
	default:
		out.Holds = "numbers"
		if c.field.Class == events.Truth {
			out.Holds = "true or false"
		}
		if c.lo <= c.hi {
			lo, hi := c.lo, c.hi
			out.Least, out.Greatest = &lo, &hi
		}
	}
	return out
}
