package parquetfile

import (
	"encoding/binary"
	"math"

	"github.com/apache/arrow/go/v17/parquet"

	"drumlin/io/events"
)

var _ events.Surveyor = (*File)(nil)

// Bounds returns the least and greatest value of a column by the statistics of
// all row groups. Only signed integers and floats count; a row group without
// statistics, or with a NaN among them, makes the answer unknown. The
// statistics are the writer's word and are not checked against the rows.
func (f *File) Bounds(name string) (lo, hi float64, ok bool) {
	at := f.leafAt(name)
	if at < 0 || !f.leaves[at].numeric() {
		return 0, 0, false
	}
	lo, hi = math.Inf(1), math.Inf(-1)
	for part, rg := range f.meta.RowGroups {
		if rg.NumRows == 0 {
			continue
		}
		st, ok := f.stat(part, at)
		if !ok {
			return 0, 0, false
		}
		if st.Nulls == rg.NumRows {
			continue
		}
		lo, hi = min(lo, st.Lo), max(hi, st.Hi)
	}
	if !(lo <= hi) {
		return 0, 0, false
	}
	return lo, hi, true
}

// Stat returns the statistics of a column in one row group: false where there
// are none, or one is NaN, or the type has no order that all writers share
// (unsigned integers, decimals, text). A column of nulls alone has the range
// from +Inf to -Inf.
func (f *File) Stat(part int, name string) (events.Stat, bool) {
	at := f.leafAt(name)
	if at < 0 || part < 0 || part >= f.Parts() {
		return events.Stat{}, false
	}
	return f.stat(part, at)
}

// leafAt finds the one column with the name, -1 if there is none or more.
func (f *File) leafAt(name string) int {
	at := -1
	for i, l := range f.leaves {
		if l.name == name {
			if at >= 0 {
				return -1
			}
			at = i
		}
	}
	return at
}

func (f *File) stat(part, at int) (events.Stat, bool) {
	none := events.Stat{}
	l := &f.leaves[at]
	rg := f.meta.RowGroups[part]
	switch l.kind {
	case kindF64, kindF32, kindI32, kindI64, kindDate, kindMillis, kindMicros, kindNanos:
	default:
		return none, false
	}
	if l.pow != 0 || at >= len(rg.Columns) || rg.Columns[at] == nil || rg.Columns[at].MetaData == nil {
		return none, false
	}
	m := rg.Columns[at].MetaData
	if m.Statistics == nil || parquet.Type(m.Type) != l.phys {
		return none, false
	}
	st := m.Statistics
	out := events.Stat{Lo: math.Inf(1), Hi: math.Inf(-1), Nulls: -1}
	if st.NullCount != nil {
		out.Nulls = *st.NullCount
		if out.Nulls == m.NumValues {
			return out, true
		}
	}
	bmin, bmax := st.MinValue, st.MaxValue
	if bmin == nil && bmax == nil {
		bmin, bmax = st.Min, st.Max
	}
	if len(bmin) != l.width || len(bmax) != l.width {
		return none, false
	}
	out.Lo, out.Hi = l.statistic(bmin), l.statistic(bmax)
	if !(out.Lo <= out.Hi) {
		return none, false
	}
	return out, true
}

func (l *leaf) statistic(b []byte) float64 {
	switch l.kind {
	case kindF64:
		return math.Float64frombits(binary.LittleEndian.Uint64(b))
	case kindF32:
		return float64(math.Float32frombits(binary.LittleEndian.Uint32(b)))
	}
	if len(b) == 4 {
		return l.integral(int64(int32(binary.LittleEndian.Uint32(b))))
	}
	return l.integral(int64(binary.LittleEndian.Uint64(b)))
}
