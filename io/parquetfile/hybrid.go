package parquetfile

import (
	"encoding/binary"
	"errors"
)

var errRuns = errors.New("run-length data is broken or too short")

// hybrid reads the format's mixture of runs and bit-packed groups: levels,
// dictionary indices and booleans.
type hybrid struct {
	b     []byte
	width uint   // bits of a value, 0 to 32
	left  int    // values left in the current run
	run   bool   // the current run repeats val
	val   uint32 // the repeated value
	bit   int    // next bit of b in a packed run
	end   int    // first byte after the packed run
}

func (h *hybrid) reset(b []byte, width uint) { *h = hybrid{b: b, width: width} }

// more makes sure that a run is at hand.
func (h *hybrid) more() error {
	if h.left > 0 {
		return nil
	}
	if h.end > 0 {
		h.b, h.end = h.b[min(h.end, len(h.b)):], 0
	}
	c := cursor{b: h.b}
	head := c.uvarint()
	count := head >> 1
	if c.err != nil || count == 0 || count > 1<<31 {
		return errRuns
	}
	if head&1 == 1 {
		h.run, h.left, h.bit = false, int(count)*8, c.i*8
		h.end = c.i + int(count)*int(h.width)
		return nil
	}
	h.run, h.left, h.val = true, int(count), 0
	for k := uint(0); k < (h.width+7)/8; k++ {
		h.val |= uint32(c.byte()) << (8 * k)
	}
	if c.err != nil || h.width < 32 && h.val>>h.width != 0 {
		return errRuns
	}
	h.b = h.b[c.i:]
	return nil
}

// unpack reads up to len(dst) values of a packed run.
func (h *hybrid) unpack(dst []uint32) (int, error) {
	n := min(len(dst), h.left)
	if (h.bit+n*int(h.width)+7)/8 > len(h.b) {
		return 0, errRuns
	}
	mask := uint64(1)<<h.width - 1
	bit, w, b := h.bit, int(h.width), h.b
	i := 0
	for ; i < n && bit>>3+8 <= len(b); i++ {
		dst[i] = uint32(binary.LittleEndian.Uint64(b[bit>>3:]) >> (bit & 7) & mask)
		bit += w
	}
	for ; i < n; i++ {
		var v uint64
		for k := bit >> 3; k < len(b) && k <= (bit+w)>>3; k++ {
			v |= uint64(b[k]) << (8 * (k - bit>>3))
		}
		dst[i] = uint32(v >> (bit & 7) & mask)
		bit += w
	}
	h.bit = bit
	h.left -= n
	return n, nil
}

// read fills dst.
func (h *hybrid) read(dst []uint32) error {
	for len(dst) > 0 {
		if err := h.more(); err != nil {
			return err
		}
		if !h.run {
			n, err := h.unpack(dst)
			if err != nil {
				return err
			}
			dst = dst[n:]
			continue
		}
		n := min(len(dst), h.left)
		for i := range dst[:n] {
			dst[i] = h.val
		}
		h.left -= n
		dst = dst[n:]
	}
	return nil
}
