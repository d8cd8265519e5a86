package parquetfile

import (
	"encoding/binary"
	"errors"
)

var errBytes = errors.New("delta-packed byte arrays are broken or too short")

// byteRuns reads DELTA_LENGTH_BYTE_ARRAY and DELTA_BYTE_ARRAY values: lengths,
// and for the latter how much of the value before is repeated, then the bytes.
type byteRuns struct {
	prefixes, lengths []int64
	prefixed          bool
	src               []byte
	at                int // next value
	last              []byte
}

// start reads the lengths of a page of at most limit values.
func (r *byteRuns) start(src []byte, prefixed bool, limit int) error {
	r.at, r.prefixed, r.last = 0, prefixed, r.last[:0]
	r.prefixes, r.lengths = r.prefixes[:0], r.lengths[:0]
	if len(src) == 0 {
		return nil
	}
	var err error
	if prefixed {
		if r.prefixes, src, err = allDeltas(r.prefixes, src, limit); err != nil {
			return err
		}
	}
	if r.lengths, src, err = allDeltas(r.lengths, src, limit); err != nil {
		return err
	}
	if prefixed && len(r.prefixes) != len(r.lengths) {
		return errBytes
	}
	r.src = src
	return nil
}

// allDeltas decodes one delta-packed run and returns the bytes behind it.
func allDeltas(dst []int64, src []byte, limit int) ([]int64, []byte, error) {
	var d delta
	if err := d.reset(src, true); err != nil {
		return nil, nil, err
	}
	if d.left > limit {
		return nil, nil, errBytes
	}
	dst = scratch(dst, d.left)
	if err := d.read(dst); err != nil {
		return nil, nil, err
	}
	return dst, src[d.c.i:], nil
}

// next returns the next value; it is valid until the call after.
func (r *byteRuns) next() ([]byte, error) {
	if r.at >= len(r.lengths) {
		return nil, errValues
	}
	n := r.lengths[r.at]
	if n < 0 || n > int64(len(r.src)) {
		return nil, errBytes
	}
	tail := r.src[:n]
	r.src = r.src[n:]
	if !r.prefixed {
		r.at++
		return tail, nil
	}
	p := r.prefixes[r.at]
	if p < 0 || p > int64(len(r.last)) {
		return nil, errBytes
	}
	r.at++
	r.last = append(r.last[:p], tail...)
	return r.last, nil
}

// repackLevels turns n levels that are bit-packed the old way, highest bit
// first, into one packed run of the hybrid, and returns it with the bytes
// behind the levels.
func repackLevels(src []byte, n int, width uint) (runs, rest []byte, err error) {
	size := (n*int(width) + 7) / 8
	if size > len(src) {
		return nil, nil, errRuns
	}
	groups := (n + 7) / 8
	runs = binary.AppendUvarint(nil, uint64(groups)<<1|1)
	head := len(runs)
	runs = append(runs, make([]byte, groups*int(width))...)
	for i := range n {
		for k := range int(width) {
			from := i*int(width) + k
			if src[from>>3]>>(7-from&7)&1 == 1 {
				to := i*int(width) + int(width) - 1 - k
				runs[head+to>>3] |= 1 << (to & 7)
			}
		}
	}
	return runs, src[size:], nil
}
