package parquetfile

import (
	"encoding/binary"
	"errors"
	"math/bits"
)

var errDelta = errors.New("delta-packed integers are broken or too short")

// delta reads DELTA_BINARY_PACKED integers: blocks of miniblocks of
// bit-packed differences above the block's least difference.
type delta struct {
	c         cursor
	mini      int // values of a miniblock
	minis     int // miniblocks of a block
	left      int // values still to come, the first included
	first     bool
	last      int64
	minDelta  int64
	widths    []byte
	cur       int // current miniblock
	inMini    int // values left in it
	bit       int // next bit, from the start of c.b
	narrow    bool
	bitsWidth uint
}

// reset reads the header; narrow integers wrap at 32 bits.
func (d *delta) reset(b []byte, narrow bool) error {
	*d = delta{c: cursor{b: b}, narrow: narrow, first: true}
	block := d.c.uvarint()
	minis := d.c.uvarint()
	total := d.c.uvarint()
	d.last = d.c.zigzag()
	if d.c.err != nil || block == 0 || block%128 != 0 || block > 1<<24 || minis == 0 || minis > block ||
		block%minis != 0 || (block/minis)%32 != 0 || total > 1<<31 {
		return errDelta
	}
	d.mini, d.minis, d.left, d.cur = int(block/minis), int(minis), int(total), int(minis)
	return nil
}

// nextMini moves to the next miniblock, and block where one is used up.
func (d *delta) nextMini() error {
	if d.cur >= d.minis {
		d.minDelta = d.c.zigzag()
		if d.c.err != nil || len(d.c.b)-d.c.i < d.minis {
			return errDelta
		}
		d.widths = d.c.b[d.c.i : d.c.i+d.minis]
		d.c.i += d.minis
		d.cur = 0
	}
	d.bitsWidth = uint(d.widths[d.cur])
	if d.bitsWidth > 64 {
		return errDelta
	}
	d.bit = d.c.i * 8
	d.c.i = min(d.c.i+d.mini*int(d.bitsWidth)/8, len(d.c.b))
	d.inMini = d.mini
	d.cur++
	return nil
}

// read fills dst with the next integers.
func (d *delta) read(dst []int64) error {
	if len(dst) > d.left {
		return errDelta
	}
	d.left -= len(dst)
	i := 0
	if d.first && len(dst) > 0 {
		dst[0], d.first, i = d.last, false, 1
	}
	for i < len(dst) {
		if d.inMini == 0 {
			if err := d.nextMini(); err != nil {
				return err
			}
		}
		n := min(len(dst)-i, d.inMini)
		if (d.bit+n*int(d.bitsWidth)+7)/8 > len(d.c.b) {
			return errDelta
		}
		for k := 0; k < n; k++ {
			d.last += d.minDelta + int64(takeBits(d.c.b, d.bit, d.bitsWidth))
			if d.narrow {
				d.last = int64(int32(d.last))
			}
			d.bit += int(d.bitsWidth)
			dst[i+k] = d.last
		}
		d.inMini -= n
		i += n
	}
	return nil
}

// takeBits reads w bits, lowest first, from a bit position that is in range.
func takeBits(b []byte, bit int, w uint) uint64 {
	at, sh := bit>>3, uint(bit&7)
	if at+9 <= len(b) {
		v := binary.LittleEndian.Uint64(b[at:]) >> sh
		if sh+w > 64 {
			v |= uint64(b[at+8]) << (64 - sh)
		}
		return v & (1<<w - 1)
	}
	var v uint64
	for k := uint(0); k < w; {
		part := uint64(b[at]) >> sh
		v |= part << k
		k += 8 - sh
		at, sh = at+1, 0
	}
	return v & (1<<w - 1)
}

// levelWidth is the number of bits of a level.
func levelWidth(top int) uint { return uint(bits.Len(uint(top))) }
