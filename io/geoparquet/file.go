package geoparquet

import (
	"context"
	"fmt"
	"strings"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// File is a Parquet file with geometry columns. It implements events.Source and
// events.Surveyor and is safe for concurrent use.
type File struct {
	*parquetfile.File
	fields []events.Field
	geoms  []events.Geometry
	binary map[string]ordinate // columns made from binary ones
	native map[string]bool     // ordinates that are stored as numbers
}

// ordinate is one of the two columns of a binary geometry column.
type ordinate struct {
	column string
	second bool // y
}

var (
	_ events.Source   = (*File)(nil)
	_ events.Surveyor = (*File)(nil)
)

// Open is parquetfile.Open; a file without geometry columns stays as it is.
func Open(path string, opt parquetfile.Options) (events.Source, error) {
	f, err := parquetfile.Open(path, opt)
	if err != nil {
		return nil, err
	}
	return Wrap(f), nil
}

// Wrap makes the points of the declared geometry columns readable.
func Wrap(f *parquetfile.File) events.Source {
	declared := f.Geometries()
	if len(declared) == 0 {
		return f
	}
	w := &File{File: f, binary: map[string]ordinate{}, native: map[string]bool{}}
	stored := f.Fields()
	for _, g := range declared {
		e := events.Geometry{Name: g.Name, Type: g.Encoding, CRS: g.CRS, Primary: g.Primary}
		own, err := events.FindField(g.Name, stored)
		switch {
		case strings.EqualFold(g.Encoding, "WKB") && err == nil && !own.Readable() && !strings.HasPrefix(own.Type, "repeated") && free(g.Name, stored):
			if e.Refusal = otherTypes(g.Types); e.Refusal == "" {
				w.binary[g.Name+".x"] = ordinate{column: g.Name}
				w.binary[g.Name+".y"] = ordinate{column: g.Name, second: true}
			}
		case strings.EqualFold(g.Encoding, "point"):
			if events.CheckNumeric(g.Name+".x", stored) != nil || events.CheckNumeric(g.Name+".y", stored) != nil {
				e.Refusal = "is declared as points, but has no numbers x and y"
			} else {
				w.native[g.Name+".x"], w.native[g.Name+".y"] = true, true
			}
		default:
			e.Refusal = fmt.Sprintf("holds %s, not points", g.Encoding)
		}
		w.geoms = append(w.geoms, e)
	}
	for _, field := range stored {
		if _, ok := w.binary[field.Name+".x"]; !ok {
			w.fields = append(w.fields, field)
			continue
		}
		for _, axis := range []string{".x", ".y"} {
			w.fields = append(w.fields, events.Field{Name: field.Name + axis, Type: "point in WKB", Numeric: true})
		}
	}
	return w
}

// free reports that the names of the two columns are free.
func free(name string, fields []events.Field) bool {
	for _, f := range fields {
		if f.Name == name+".x" || f.Name == name+".y" {
			return false
		}
	}
	return true
}

// otherTypes says what a column holds that is declared to hold no points.
func otherTypes(types []string) string {
	for _, t := range types {
		if t == "Point" || strings.HasPrefix(t, "Point ") {
			return ""
		}
	}
	if len(types) == 0 {
		return ""
	}
	return "holds " + strings.Join(types, " and ") + ", not points"
}

// Info describes the file and which of its geometry columns can be read.
func (f *File) Info() events.Info {
	i := f.File.Info()
	i.Geometries = append([]events.Geometry(nil), f.geoms...)
	return i
}

// Fields lists the columns, with g.x and g.y in the place of a binary column g.
func (f *File) Fields() []events.Field { return append([]events.Field(nil), f.fields...) }

// Bounds are unknown of binary columns.
func (f *File) Bounds(column string) (lo, hi float64, ok bool) {
	if _, made := f.binary[column]; made {
		return 0, 0, false
	}
	return f.File.Bounds(column)
}

// Stat is unknown of binary columns.
func (f *File) Stat(part int, column string) (events.Stat, bool) {
	if _, made := f.binary[column]; made {
		return events.Stat{}, false
	}
	return f.File.Stat(part, column)
}

// Read yields the named columns of one row group.
func (f *File) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	var stored []string
	var codes []parquetfile.Coder
	var sets []*points
	place := make([]int, len(columns))
	at := map[string]int{}
	special := false
	for k, name := range columns {
		from := name
		o, made := f.binary[name]
		if made {
			from = o.column
		}
		special = special || made || f.native[name]
		i, seen := at[from]
		if !seen || !made {
			i = len(stored)
			stored, codes, sets = append(stored, from), append(codes, nil), append(sets, nil)
			if made {
				p := new(points)
				codes[i], sets[i] = p, p
			}
			at[from] = i
		}
		place[k] = i
	}
	if !special {
		return f.File.Read(ctx, part, columns, yield)
	}
	views := make([][]float64, len(columns))
	made := make([][]float64, len(columns))
	return f.ReadCoded(ctx, part, stored, codes, func(b events.Batch) error {
		out := events.Batch{Columns: views}
		if b.Words != nil {
			out.Words = make([][]string, len(columns))
		}
		for k, i := range place {
			if b.Words != nil {
				out.Words[k] = b.WordsOf(i)
			}
			views[k] = b.Columns[i]
			if p := sets[i]; p != nil {
				list := p.x
				if f.binary[columns[k]].second {
					list = p.y
				}
				made[k] = decode(made[k], b.Columns[i], list)
				views[k] = made[k]
			} else if f.native[columns[k]] {
				emptyPoints(views[k])
			}
		}
		return yield(out)
	})
}

// decode looks the codes up.
func decode(dst, codes, list []float64) []float64 {
	if cap(dst) < len(codes) {
		dst = make([]float64, len(codes))
	}
	dst = dst[:len(codes)]
	for i, c := range codes {
		if c == c {
			dst[i] = list[int(c)]
		} else {
			dst[i] = events.Null
		}
	}
	return dst
}

// emptyPoints marks the NaN that stands for an empty point.
func emptyPoints(v []float64) {
	for i, c := range v {
		if c != c {
			v[i] = events.Null
		}
	}
}
