// Package partition reads keys from the folders a file lies in, as in
// year=2025/kind=fire/part-0.parquet, and adds them as columns.
//
// Notation: key=value folders; a value is percent-decoded;
// __HIVE_DEFAULT_PARTITION__ stands for an absent one. A key whose values are
// numbers in every file is a column of numbers, else one of text.
//
// Cost: O(rows) to fill a column that is asked for; nothing else.
package partition

import (
	"context"
	"math"
	"net/url"
	"path/filepath"
	"strconv"
	"strings"

	"drumlin/io/events"
)

const absent = "__HIVE_DEFAULT_PARTITION__"

// Key is one key of a path.
type Key struct {
	Name  string
	Value string
	Null  bool // the value is absent
}

// Number returns the value as a number, and whether it is one.
func (k Key) Number() (float64, bool) {
	if k.Null {
		return events.Null, true
	}
	if strings.ContainsAny(k.Value, "xX_pP") || len(k.Value) > 64 {
		return 0, false
	}
	v, err := strconv.ParseFloat(k.Value, 64)
	return v, err == nil && !math.IsNaN(v) && !math.IsInf(v, 0)
}

// Keys returns the keys of a path, outermost first. Where a name comes twice
// the innermost folder counts. The file's own name is none.
func Keys(path string) []Key {
	var out []Key
	for _, part := range strings.Split(filepath.ToSlash(filepath.Dir(path)), "/") {
		name, value, ok := strings.Cut(part, "=")
		if !ok || name == "" {
			continue
		}
		k := Key{Name: decode(name), Value: decode(value)}
		if value == absent || value == "" {
			k = Key{Name: k.Name, Null: true}
		}
		kept := out[:0]
		for _, o := range out {
			if o.Name != k.Name {
				kept = append(kept, o)
			}
		}
		out = append(kept, k)
	}
	return out
}

// decode undoes percent-encoding; text with a stray per cent sign stays as it is.
func decode(s string) string {
	if d, err := url.PathUnescape(s); err == nil {
		return strings.ToValidUTF8(d, "\uFFFD")
	}
	return strings.ToValidUTF8(s, "\uFFFD")
}

// Wrap adds the keys of each source's path, names[i], as columns. A column of
// that name in the file itself wins over the key.
func Wrap(sources []events.Source, names []string) []events.Source {
	keys := make([][]Key, len(sources))
	text := map[string]bool{}
	for i := range sources {
		keys[i] = Keys(names[i])
		for _, k := range keys[i] {
			if _, ok := k.Number(); !ok {
				text[k.Name] = true
			}
		}
	}
	out := make([]events.Source, len(sources))
	for i, s := range sources {
		out[i] = s
		own := map[string]bool{}
		for _, f := range s.Fields() {
			own[f.Name] = true
		}
		w := &wrapped{Source: s, at: map[string]int{}}
		for _, k := range keys[i] {
			if own[k.Name] {
				continue
			}
			c := constant{field: events.Field{Name: k.Name, Type: "partition key", Numeric: true}}
			if text[k.Name] {
				c.field.Numeric, c.field.Class, c.words = false, events.Text, []string{k.Value}
			} else {
				c.value, _ = k.Number()
			}
			if k.Null {
				c.value = events.Null
			}
			w.at[k.Name] = len(w.columns)
			w.columns = append(w.columns, c)
		}
		if len(w.columns) > 0 {
			out[i] = w
		}
	}
	return out
}

// constant is a column with one value.
type constant struct {
	field events.Field
	value float64
	words []string // of text
}

type wrapped struct {
	events.Source
	columns []constant
	at      map[string]int
}

// Fields lists the file's columns, then the keys.
func (w *wrapped) Fields() []events.Field {
	out := w.Source.Fields()
	for _, c := range w.columns {
		out = append(out, c.field)
	}
	return out
}

// Bounds of a key are its value.
func (w *wrapped) Bounds(column string) (lo, hi float64, ok bool) {
	if i, mine := w.at[column]; mine {
		c := w.columns[i]
		return c.value, c.value, c.words == nil && !events.IsNull(c.value)
	}
	return w.Source.Bounds(column)
}

// Stat of a key is its value.
func (w *wrapped) Stat(part int, column string) (events.Stat, bool) {
	i, mine := w.at[column]
	if !mine {
		return events.StatOf(w.Source, part, column)
	}
	c := w.columns[i]
	if events.IsNull(c.value) {
		return events.Stat{Lo: math.Inf(1), Hi: math.Inf(-1), Nulls: w.PartRows(part), Words: []string{}}, true
	}
	return events.Stat{Lo: c.value, Hi: c.value, Words: c.words}, true
}

// Read reads the file's columns and fills in the keys.
func (w *wrapped) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	var inner []string
	place := make([]int, len(columns)) // in inner, or -1 - key
	keys := 0
	for k, name := range columns {
		if i, mine := w.at[name]; mine {
			place[k] = -1 - i
			keys++
			continue
		}
		place[k] = len(inner)
		inner = append(inner, name)
	}
	if keys == 0 {
		return w.Source.Read(ctx, part, columns, yield)
	}
	if len(inner) == 0 { // any column counts the rows
		for _, f := range w.Source.Fields() {
			if f.Readable() {
				inner = append(inner, f.Name)
				break
			}
		}
		if len(inner) == 0 {
			return &events.Fault{Kind: events.ErrUnsupported, File: w.Info().Name, What: "no column of the file can be read"}
		}
	}
	views := make([][]float64, len(columns))
	fill := make([][]float64, len(columns))
	return w.Source.Read(ctx, part, inner, func(b events.Batch) error {
		out := events.Batch{Columns: views, Words: make([][]string, len(columns))}
		n := b.Len()
		for k, at := range place {
			if at >= 0 {
				views[k], out.Words[k] = b.Columns[at], b.WordsOf(at)
				continue
			}
			c := w.columns[-1-at]
			if cap(fill[k]) < n {
				fill[k] = make([]float64, n)
			}
			views[k] = fill[k][:n]
			for i := range views[k] {
				views[k][i] = c.value
			}
			out.Words[k] = c.words
		}
		return yield(out)
	})
}
