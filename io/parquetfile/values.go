package parquetfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"

	"github.com/apache/arrow/go/v17/parquet"

	"drumlin/io/events"
)

var (
	errValues = errors.New("page holds fewer values than its header says")
	errIndex  = errors.New("index beyond the dictionary")
)

// values decodes the non-null values of one page, lazily and in order.
type values struct {
	leaf *leaf
	code Coder // of byte strings
	enc  int32
	src  []byte
	pos  int // bytes, bits or values of src consumed, by encoding
	n    int // values of a split page
	runs hybrid
	del  delta
	strs byteRuns
	dict []float64
	idx  []uint32 // scratch
	ints []int64  // scratch
}

// start begins a page of rows, nulls included, whose values are encoded in src.
func (v *values) start(enc int32, src []byte, rows int) error {
	v.enc, v.src, v.pos = enc, src, 0
	l := v.leaf
	switch enc {
	case encPlain:
		return nil
	case encByteStreamSplit:
		if l.width <= 0 {
			return fmt.Errorf("byte-stream-split values of type %s", l.phys)
		}
		v.n = len(src) / l.width
		return nil
	case encPlainDict, encRLEDict:
		v.enc = encRLEDict
		if len(src) == 0 { // a page of nulls
			v.runs.reset(nil, 0)
			return nil
		}
		if src[0] > 32 {
			return fmt.Errorf("dictionary indices of %d bits", src[0])
		}
		v.runs.reset(src[1:], uint(src[0]))
		return nil
	case encRLE:
		if l.kind != kindBool {
			return fmt.Errorf("run-length values of type %s", l.phys)
		}
		if len(src) < 4 {
			v.runs.reset(nil, 1)
			return nil
		}
		n := binary.LittleEndian.Uint32(src)
		if uint64(n) > uint64(len(src)-4) {
			return errRuns
		}
		v.runs.reset(src[4:4+n], 1)
		return nil
	case encDeltaBinary:
		if !l.integer() {
			return fmt.Errorf("delta-packed values of type %s", l.phys)
		}
		if len(src) == 0 {
			v.del = delta{}
			return nil
		}
		return v.del.reset(src, l.width == 4)
	case encDeltaLength, encDeltaBytes:
		if l.phys != parquet.Types.ByteArray && l.phys != parquet.Types.FixedLenByteArray {
			return fmt.Errorf("delta-packed byte arrays of type %s", l.phys)
		}
		return v.strs.start(src, enc == encDeltaBytes, rows)
	}
	return fmt.Errorf("encoding %d of values of type %s", enc, l.phys)
}

func (l *leaf) integer() bool {
	switch l.kind {
	case kindI32, kindI64, kindU32, kindU64, kindDate, kindMillis, kindMicros, kindNanos:
		return true
	}
	return false
}

// read fills dst with the next values.
func (v *values) read(dst []float64) error {
	if len(dst) == 0 {
		return nil
	}
	switch v.enc {
	case encPlain:
		return v.readPlain(dst)
	case encByteStreamSplit:
		if v.pos+len(dst) > v.n {
			return errValues
		}
		v.leaf.unsplit(dst, v.src[:v.n*v.leaf.width], v.n, v.pos)
		v.pos += len(dst)
	case encRLEDict:
		return v.readDict(dst)
	case encDeltaLength, encDeltaBytes:
		for i := range dst {
			b, err := v.strs.next()
			if err != nil {
				return err
			}
			if v.leaf.width > 0 && len(b) != v.leaf.width {
				return errValues
			}
			switch v.leaf.kind {
			case kindCode:
				dst[i] = v.code.Code(b)
			case kindBig:
				dst[i] = v.leaf.bigValue(b)
			default:
				v.leaf.plain(dst[i:i+1], b)
			}
		}
	case encRLE:
		v.idx = scratch(v.idx, len(dst))
		if err := v.runs.read(v.idx); err != nil {
			return err
		}
		for i, b := range v.idx {
			dst[i] = float64(b)
		}
	case encDeltaBinary:
		v.ints = scratch(v.ints, len(dst))
		if err := v.del.read(v.ints); err != nil {
			return err
		}
		for i, n := range v.ints {
			dst[i] = v.leaf.integral(n)
		}
		v.leaf.scale(dst)
	}
	return nil
}

func scratch[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

func (v *values) readPlain(dst []float64) error {
	l := v.leaf
	switch {
	case l.kind == kindBool:
		if (v.pos+len(dst)+7)/8 > len(v.src) {
			return errValues
		}
		for i := range dst {
			dst[i] = float64(v.src[v.pos>>3] >> (v.pos & 7) & 1)
			v.pos++
		}
		return nil
	case l.width > 0:
		if len(dst) > (len(v.src)-v.pos)/l.width {
			return errValues
		}
		l.plain(dst, v.src[v.pos:])
		v.pos += len(dst) * l.width
		return nil
	}
	for i := range dst {
		if len(v.src)-v.pos < 4 {
			return errValues
		}
		n := binary.LittleEndian.Uint32(v.src[v.pos:])
		v.pos += 4
		if uint64(n) > uint64(len(v.src)-v.pos) {
			return errValues
		}
		b := v.src[v.pos : v.pos+int(n)]
		v.pos += int(n)
		if l.kind == kindCode {
			dst[i] = v.code.Code(b)
		} else {
			dst[i] = l.bigValue(b)
		}
	}
	return nil
}

// plain decodes fixed-width values; src holds at least len(dst) of them.
func (l *leaf) plain(dst []float64, src []byte) {
	switch l.kind {
	case kindF64:
		src = src[:8*len(dst)]
		for i := range dst {
			dst[i] = math.Float64frombits(binary.LittleEndian.Uint64(src[8*i:]))
		}
	case kindF32:
		for i := range dst {
			dst[i] = float64(math.Float32frombits(binary.LittleEndian.Uint32(src[4*i:])))
		}
	case kindI32:
		for i := range dst {
			dst[i] = float64(int32(binary.LittleEndian.Uint32(src[4*i:])))
		}
	case kindU32:
		for i := range dst {
			dst[i] = float64(binary.LittleEndian.Uint32(src[4*i:]))
		}
	case kindI64:
		for i := range dst {
			dst[i] = float64(int64(binary.LittleEndian.Uint64(src[8*i:])))
		}
	case kindU64:
		for i := range dst {
			dst[i] = float64(binary.LittleEndian.Uint64(src[8*i:]))
		}
	case kindF16:
		for i := range dst {
			dst[i] = halfValue(binary.LittleEndian.Uint16(src[2*i:]))
		}
	case kindBig:
		for i := range dst {
			dst[i] = l.bigValue(src[i*l.width : (i+1)*l.width])
		}
		return
	case kindI96:
		for i := range dst {
			dst[i] = i96Value(src[12*i:])
		}
		return
	case kindDate:
		for i := range dst {
			dst[i] = l.integral(int64(int32(binary.LittleEndian.Uint32(src[4*i:]))))
		}
		return
	case kindMillis, kindMicros, kindNanos:
		for i := range dst {
			dst[i] = l.integral(int64(binary.LittleEndian.Uint64(src[8*i:])))
		}
		return
	}
	l.scale(dst)
}

// scale divides integer decimals by their power of ten.
func (l *leaf) scale(dst []float64) {
	if l.pow == 0 || l.kind == kindBig {
		return
	}
	for i := range dst {
		dst[i] /= l.pow
	}
}

// unsplit decodes values whose k-th bytes lie together in stream k of n bytes.
func (l *leaf) unsplit(dst []float64, src []byte, n, at int) {
	switch {
	case l.width == 8 && l.kind == kindF64:
		s0, s1, s2, s3 := src[at:], src[n+at:], src[2*n+at:], src[3*n+at:]
		s4, s5, s6, s7 := src[4*n+at:], src[5*n+at:], src[6*n+at:], src[7*n+at:]
		for i := range dst {
			dst[i] = math.Float64frombits(uint64(s0[i]) | uint64(s1[i])<<8 | uint64(s2[i])<<16 | uint64(s3[i])<<24 |
				uint64(s4[i])<<32 | uint64(s5[i])<<40 | uint64(s6[i])<<48 | uint64(s7[i])<<56)
		}
	default:
		buf := make([]byte, l.width)
		for i := range dst {
			for k := range buf {
				buf[k] = src[k*n+at+i]
			}
			l.plain(dst[i:i+1], buf)
		}
	}
}

// setDict decodes a dictionary page.
func (v *values) setDict(n int, data []byte) error {
	size := max(v.leaf.width, 1)
	if v.leaf.width == 0 {
		size = 4
	}
	if v.leaf.kind == kindBool || n > len(data)/size {
		return errors.New("dictionary is broken or too short")
	}
	v.dict = scratch(v.dict, n)
	v.enc, v.src, v.pos = encPlain, data, 0
	if err := v.read(v.dict); err != nil || v.code == nil {
		return err
	}
	v.code.Keep()
	return nil
}

func (v *values) readDict(dst []float64) error {
	r := &v.runs
	dict := v.dict
	for len(dst) > 0 {
		if err := r.more(); err != nil {
			return err
		}
		if r.run {
			if int(r.val) >= len(dict) {
				return errIndex
			}
			n, x := min(len(dst), r.left), dict[r.val]
			for i := range dst[:n] {
				dst[i] = x
			}
			r.left -= n
			dst = dst[n:]
			continue
		}
		v.idx = scratch(v.idx, 1024)
		n, err := r.unpack(v.idx[:min(1024, len(dst))])
		if err != nil {
			return err
		}
		for i, k := range v.idx[:n] {
			if int(k) >= len(dict) {
				return errIndex
			}
			dst[i] = dict[k]
		}
		dst = dst[n:]
	}
	return nil
}

// spread moves the values at the front of dst to the rows that are defined and
// writes nulls into the others.
func spread(dst []float64, defs []uint32, top uint32, defined int) {
	j := defined - 1
	for i := len(defs) - 1; i >= 0; i-- {
		if defs[i] == top {
			dst[i] = dst[j]
			j--
		} else {
			dst[i] = events.Null
		}
	}
}
