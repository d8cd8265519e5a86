package parquetfile

import (
	"encoding/binary"
	"fmt"
	"math"
	"math/big"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/schema"

	"drumlin/io/events"
)

// kind says how stored values become float64.
type kind uint8

const (
	kindNone kind = iota // not numeric
	kindF64
	kindF32
	kindF16
	kindI32
	kindI64
	kindU32
	kindU64
	kindBool
	kindBig // two's complement, highest byte first: decimals as bytes

	kindCode   // byte strings, by way of a Coder
	kindDate   // 32-bit days since 1970
	kindMillis // 64-bit, since 1970
	kindMicros
	kindNanos
	kindI96 // nanoseconds of a day and a Julian day number
)

const (
	microsPerDay = 86400e6
	julian1970   = 2440588 // Julian day number of 1970-01-01
)

// leaf is one column of values.
type leaf struct {
	name   string // dotted path
	typ    string // for messages
	kind   kind
	class  events.Class
	phys   parquet.Type
	width  int     // bytes of a plain value, 0 where it varies, -1 for bits
	digits int     // decimal digits after the point
	pow    float64 // 10^digits, exact up to 22 digits; 0 where there are none
	maxDef int
	lost   dropped // logical type that was cut out of the footer
}

// newLeaf describes a column of the schema.
func newLeaf(c *schema.Column, lost dropped) leaf {
	l := leaf{name: c.Path(), phys: c.PhysicalType(), maxDef: int(c.MaxDefinitionLevel()), lost: lost}
	l.typ = l.phys.String()
	lt := c.LogicalType()
	if lost.id != 0 {
		l.typ = lost.String()
	} else if lt != nil && !lt.IsNone() && lt.IsValid() {
		l.typ = lt.String()
	}
	switch l.phys {
	case parquet.Types.Double:
		l.kind, l.width = kindF64, 8
	case parquet.Types.Float:
		l.kind, l.width = kindF32, 4
	case parquet.Types.Boolean:
		l.kind, l.width, l.class = kindBool, -1, events.Truth
	case parquet.Types.Int96:
		l.kind, l.width, l.class = kindI96, 12, events.Instant
	case parquet.Types.ByteArray:
		l.kind = kindCode
		if lost.id == 0 {
			l.class = events.Text
		}
	case parquet.Types.Int32:
		l.kind, l.width = kindI32, 4
	case parquet.Types.Int64:
		l.kind, l.width = kindI64, 8
	case parquet.Types.FixedLenByteArray:
		l.width = c.TypeLength()
	}
	switch t := lt.(type) {
	case interface { // a signed or unsigned integer
		BitWidth() int8
		IsSigned() bool
	}:
		if !t.IsSigned() && l.kind == kindI32 {
			l.kind = kindU32
		} else if !t.IsSigned() && l.kind == kindI64 {
			l.kind = kindU64
		}
	case schema.DecimalLogicalType, *schema.DecimalLogicalType:
		l.decimal(lt)
	case schema.Float16LogicalType, *schema.Float16LogicalType:
		if l.width == 2 && l.phys == parquet.Types.FixedLenByteArray {
			l.kind = kindF16
		}
	case schema.DateLogicalType, *schema.DateLogicalType:
		l.kind, l.class = kindDate, events.WallClock
	case schema.TimestampLogicalType:
		l.timestamp(t.IsAdjustedToUTC(), t.TimeUnit())
	case *schema.TimestampLogicalType:
		l.timestamp(t.IsAdjustedToUTC(), t.TimeUnit())
	case schema.TimeLogicalType, *schema.TimeLogicalType:
		l.kind = kindNone
	case schema.BSONLogicalType, *schema.BSONLogicalType:
		l.class = events.Plain
	}
	if c.MaxRepetitionLevel() > 0 {
		l.kind, l.class = kindNone, events.Plain
		l.typ = "repeated " + l.typ
	}
	return l
}

func (l *leaf) timestamp(utc bool, unit schema.TimeUnitType) {
	l.class = events.WallClock
	if utc {
		l.class = events.Instant
	}
	switch unit {
	case schema.TimeUnitMillis:
		l.kind = kindMillis
	case schema.TimeUnitMicros:
		l.kind = kindMicros
	case schema.TimeUnitNanos:
		l.kind = kindNanos
	default:
		l.kind, l.class = kindNone, events.Plain
	}
}

// numeric reports whether the values are numbers, not times or codes.
func (l *leaf) numeric() bool { return l.kind != kindNone && l.kind < kindCode }

// integral turns a stored integer of the column into its value.
func (l *leaf) integral(n int64) float64 {
	switch l.kind {
	case kindU32:
		return float64(uint32(n))
	case kindU64:
		return float64(uint64(n))
	case kindDate:
		return float64(n) * microsPerDay
	case kindMillis:
		return float64(n) * 1000
	case kindNanos:
		q := n / 1000
		if n%1000 < 0 {
			q--
		}
		return float64(q)
	}
	return float64(n)
}

// i96Value reads a time of 12 bytes.
func i96Value(b []byte) float64 {
	nanos := int64(binary.LittleEndian.Uint64(b))
	day := int64(int32(binary.LittleEndian.Uint32(b[8:])))
	return float64(day-julian1970)*microsPerDay + math.Floor(float64(nanos)/1000)
}

func (l *leaf) decimal(t schema.LogicalType) {
	d, ok := t.(interface {
		Precision() int32
		Scale() int32
	})
	if !ok || d.Scale() < 0 || d.Scale() > 1000 {
		l.kind, l.class = kindNone, events.Plain
		return
	}
	l.class = events.Plain
	switch l.phys {
	case parquet.Types.ByteArray:
		l.kind = kindBig
	case parquet.Types.FixedLenByteArray:
		if l.width > 0 {
			l.kind = kindBig
		}
	}
	l.digits = int(d.Scale())
	if l.digits > 0 {
		l.pow = math.Pow10(l.digits)
	}
	l.typ = fmt.Sprintf("DECIMAL(%d,%d)", d.Precision(), d.Scale())
}

// bigValue turns a decimal stored as bytes into the nearest float64.
func (l *leaf) bigValue(b []byte) float64 {
	if len(b) <= 8 {
		var v int64
		if len(b) > 0 && b[0] >= 0x80 {
			v = -1
		}
		for _, c := range b {
			v = v<<8 | int64(c)
		}
		if -1<<53 <= v && v <= 1<<53 && l.digits <= 22 {
			if l.pow == 0 {
				return float64(v)
			}
			return float64(v) / l.pow
		}
	}
	n := new(big.Int).SetBytes(b)
	if len(b) > 0 && b[0] >= 0x80 {
		n.Sub(n, new(big.Int).Lsh(big.NewInt(1), uint(8*len(b))))
	}
	den := new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(l.digits)), nil)
	v, _ := new(big.Rat).SetFrac(n, den).Float64()
	return v
}

// halfValue turns the bits of a 16-bit float into a float64, exactly.
func halfValue(h uint16) float64 {
	sign, exp, frac := h>>15, int(h>>10&31), float64(h&0x3ff)
	var v float64
	switch {
	case exp == 31 && frac != 0:
		return math.NaN()
	case exp == 31:
		v = math.Inf(1)
	case exp == 0:
		v = math.Ldexp(frac, -24)
	default:
		v = math.Ldexp(1024+frac, exp-25)
	}
	if sign == 1 {
		return math.Copysign(v, -1)
	}
	return v
}
