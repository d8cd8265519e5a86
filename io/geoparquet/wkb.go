package geoparquet

import (
	"encoding/binary"
	"math"

	"drumlin/io/events"
)

// Flags that some writers put into the type word instead of the thousands.
const (
	flagZ    = 0x80000000
	flagM    = 0x40000000
	flagSRID = 0x20000000
)

// Point reads the position of a point in well-known binary.
func Point(b []byte) (x, y float64) {
	if len(b) < 5 || b[0] > 1 {
		return events.NotAValue, events.NotAValue
	}
	order := binary.ByteOrder(binary.BigEndian)
	if b[0] == 1 {
		order = binary.LittleEndian
	}
	word := order.Uint32(b[1:])
	size := 5 + 16
	if word&flagSRID != 0 {
		size += 4
	}
	kind := word &^ (flagZ | flagM | flagSRID)
	z, m := word&flagZ != 0, word&flagM != 0
	if kind >= 1000 && word == kind {
		z, m = kind/1000 == 1 || kind/1000 == 3, kind/1000 == 2 || kind/1000 == 3
		kind %= 1000
	}
	if kind == 0 || kind > 17 || word&^(flagZ|flagM|flagSRID) >= 4000 {
		return events.NotAValue, events.NotAValue
	}
	if kind != 1 {
		return events.OtherShape, events.OtherShape
	}
	at := size - 16
	for _, more := range []bool{z, m} {
		if more {
			size += 8
		}
	}
	if len(b) != size {
		return events.NotAValue, events.NotAValue
	}
	x, y = math.Float64frombits(order.Uint64(b[at:])), math.Float64frombits(order.Uint64(b[at+8:]))
	if x != x && y != y {
		return events.Null, events.Null
	}
	return plain(x), plain(y)
}

// plain keeps a NaN in the data from looking like one of the marks.
func plain(v float64) float64 {
	if v != v {
		return math.NaN()
	}
	return v
}

// points is the coder of a binary column: a code is a place in the two lists.
type points struct {
	x, y []float64
	kept int
}

func (p *points) Code(b []byte) float64 {
	x, y := Point(b)
	p.x, p.y = append(p.x, x), append(p.y, y)
	return float64(len(p.x) - 1)
}

func (p *points) Keep() { p.kept = len(p.x) }

func (p *points) Next() { p.x, p.y = p.x[:p.kept], p.y[:p.kept] }
