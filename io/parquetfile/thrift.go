package parquetfile

import "errors"

// Types of the compact protocol.
const (
	tTrue   = 1
	tFalse  = 2
	tByte   = 3
	tI16    = 4
	tI32    = 5
	tI64    = 6
	tDouble = 7
	tBinary = 8
	tList   = 9
	tSet    = 10
	tMap    = 11
	tStruct = 12
)

// maxNesting bounds structs within structs, here and in the schema.
const maxNesting = 64

var (
	errShort  = errors.New("metadata ends in the middle of a value")
	errThrift = errors.New("metadata breaks the compact encoding")
)

// cursor walks compact-protocol bytes without allocating. Every length is held
// against the bytes that are left. The first error sticks; after it every
// method returns zero.
type cursor struct {
	b   []byte
	i   int
	err error
}

func (c *cursor) fail(err error) {
	if c.err == nil {
		c.err = err
	}
}

func (c *cursor) byte() byte {
	if c.err != nil {
		return 0
	}
	if c.i >= len(c.b) {
		c.fail(errShort)
		return 0
	}
	c.i++
	return c.b[c.i-1]
}

func (c *cursor) uvarint() uint64 {
	var v uint64
	for shift := uint(0); shift < 70; shift += 7 {
		b := c.byte()
		v |= uint64(b&0x7f) << shift
		if b < 0x80 {
			return v
		}
	}
	c.fail(errThrift)
	return 0
}

func (c *cursor) zigzag() int64 {
	u := c.uvarint()
	return int64(u>>1) ^ -int64(u&1)
}

// size reads a length and refuses one that the bytes left cannot hold.
func (c *cursor) size() int {
	n := c.uvarint()
	if c.err == nil && n > uint64(len(c.b)-c.i) {
		c.fail(errShort)
	}
	if c.err != nil {
		return 0
	}
	return int(n)
}

func (c *cursor) bytes() []byte {
	n := c.size()
	if c.err != nil {
		return nil
	}
	c.i += n
	return c.b[c.i-n : c.i]
}

// field reads a field header; ok is false at the end of the struct or on error.
func (c *cursor) field(last *int16) (id int16, typ byte, ok bool) {
	h := c.byte()
	if c.err != nil || h == 0 {
		return 0, 0, false
	}
	typ = h & 0x0f
	if d := h >> 4; d != 0 {
		id = *last + int16(d)
	} else {
		id = int16(c.zigzag())
	}
	*last = id
	return id, typ, c.err == nil
}

// list reads a list header; every element takes at least one byte.
func (c *cursor) list() (n int, elem byte) {
	h := c.byte()
	elem = h & 0x0f
	n = int(h >> 4)
	if n == 15 {
		n = c.size()
	} else if c.err == nil && n > len(c.b)-c.i {
		c.fail(errShort)
	}
	if c.err != nil {
		return 0, 0
	}
	return n, elem
}

// skip passes over a value of the type.
func (c *cursor) skip(typ byte, depth int) {
	if depth > maxNesting {
		c.fail(errThrift)
	}
	if c.err != nil {
		return
	}
	switch typ {
	case tTrue, tFalse: // the value is in the header
	case tByte:
		c.byte()
	case tI16, tI32, tI64:
		c.uvarint()
	case tDouble:
		if len(c.b)-c.i < 8 {
			c.fail(errShort)
			return
		}
		c.i += 8
	case tBinary:
		c.bytes()
	case tList, tSet:
		n, elem := c.list()
		for k := 0; k < n && c.err == nil; k++ {
			c.skipElem(elem, depth+1)
		}
	case tMap:
		n := c.size()
		if n == 0 {
			return
		}
		kv := c.byte()
		for k := 0; k < n && c.err == nil; k++ {
			c.skipElem(kv>>4, depth+1)
			c.skipElem(kv&0x0f, depth+1)
		}
	case tStruct:
		var last int16
		for {
			_, t, ok := c.field(&last)
			if !ok {
				return
			}
			c.skip(t, depth+1)
		}
	default:
		c.fail(errThrift)
	}
}

// skipElem passes over a list element, where a boolean takes a byte.
func (c *cursor) skipElem(typ byte, depth int) {
	if typ == tTrue || typ == tFalse {
		c.byte()
		return
	}
	c.skip(typ, depth)
}

func (c *cursor) i32(typ byte) int32 {
	if typ != tI32 && typ != tI16 {
		c.fail(errThrift)
		return 0
	}
	v := c.zigzag()
	if v != int64(int32(v)) {
		c.fail(errThrift)
	}
	return int32(v)
}
