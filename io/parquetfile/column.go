package parquetfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"

	"drumlin/io/events"
)

var errMoreRows = errors.New("more rows than the row group states")

// column reads one chunk from front to back into float64 slices.
type column struct {
	leaf    *leaf
	pages   pager
	vals    values
	levels  hybrid
	defs    []uint32
	rows    int64 // rows of the chunk still to come
	left    int   // rows of the page still to come
	hasDict bool
	padded  bool // the chunk's end is not known to the byte
}

// read fills dst with the next rows.
func (c *column) read(dst []float64) error {
	for len(dst) > 0 {
		if c.left == 0 {
			if err := c.nextPage(); err != nil {
				return err
			}
			continue
		}
		n := min(len(dst), c.left)
		var err error
		if c.leaf.maxDef == 0 {
			err = c.vals.read(dst[:n])
		} else {
			err = c.readOptional(dst[:n])
		}
		if err != nil {
			return err
		}
		c.left -= n
		c.rows -= int64(n)
		dst = dst[n:]
	}
	return nil
}

func (c *column) readOptional(dst []float64) error {
	top := uint32(c.leaf.maxDef)
	for len(dst) > 0 {
		if err := c.levels.more(); err != nil {
			return err
		}
		if c.levels.run {
			n := min(len(dst), c.levels.left)
			if c.levels.val == top {
				if err := c.vals.read(dst[:n]); err != nil {
					return err
				}
			} else if c.levels.val > top {
				return errRuns
			} else {
				for i := range dst[:n] {
					dst[i] = events.Null
				}
			}
			c.levels.left -= n
			dst = dst[n:]
			continue
		}
		c.defs = scratch(c.defs, 1024)
		n, err := c.levels.unpack(c.defs[:min(1024, len(dst))])
		if err != nil {
			return err
		}
		defined := 0
		for _, d := range c.defs[:n] {
			if d == top {
				defined++
			} else if d > top {
				return errRuns
			}
		}
		if err := c.vals.read(dst[:defined]); err != nil {
			return err
		}
		if defined < n {
			spread(dst[:n], c.defs[:n], top, defined)
		}
		dst = dst[n:]
	}
	return nil
}

// nextPage moves to the next data page, through a dictionary if there is one.
func (c *column) nextPage() error {
	for {
		p, err := c.pages.next()
		if errors.Is(err, io.EOF) {
			return fmt.Errorf("%d rows fewer than the row group states", c.rows)
		}
		if err != nil {
			return err
		}
		if p.typ == pageDict {
			if c.hasDict {
				return errors.New("more than one dictionary")
			}
			if p.enc != encPlain && p.enc != encPlainDict {
				return fmt.Errorf("dictionary in encoding %d", p.enc)
			}
			c.hasDict = true
			if err := c.vals.setDict(int(p.values), p.data); err != nil {
				return err
			}
			continue
		}
		if int64(p.values) > c.rows {
			return errMoreRows
		}
		if p.values == 0 {
			continue
		}
		return c.open(p)
	}
}

// open starts a data page.
func (c *column) open(p page) error {
	c.left = int(p.values)
	top := c.leaf.maxDef
	src := p.data
	switch {
	case p.typ == pageDataV2:
		if p.rows != p.values && p.rows != 0 {
			return fmt.Errorf("page of %d rows and %d values", p.rows, p.values)
		}
		src = src[p.repLen:]
		if top > 0 {
			c.levels.reset(src[:p.defLen], levelWidth(top))
		}
		src = src[p.defLen:]
	case top > 0 && p.levelEnc == encBitPacked:
		runs, rest, err := repackLevels(src, c.left, levelWidth(top))
		if err != nil {
			return err
		}
		c.levels.reset(runs, levelWidth(top))
		src = rest
	case top > 0:
		if p.levelEnc != encRLE {
			return fmt.Errorf("levels in encoding %d", p.levelEnc)
		}
		if len(src) < 4 {
			return errRuns
		}
		n := binary.LittleEndian.Uint32(src)
		if uint64(n) > uint64(len(src)-4) {
			return errRuns
		}
		c.levels.reset(src[4:4+n], levelWidth(top))
		src = src[4+n:]
	}
	if dictEncoded(p.enc) && !c.hasDict {
		return errors.New("dictionary indices without a dictionary")
	}
	return c.vals.start(p.enc, src, c.left)
}

func dictEncoded(enc int32) bool { return enc == encPlainDict || enc == encRLEDict }

// finish makes sure that the chunk holds no further rows.
func (c *column) finish() error {
	if c.padded {
		return nil
	}
	for c.pages.off < c.pages.end {
		h, err := c.pages.header()
		if err != nil {
			return nil //nolint:nilerr // what follows the rows promised is no page: unused bytes
		}
		if (h.typ == pageData || h.typ == pageDataV2) && h.values > 0 {
			return errMoreRows
		}
		if h.stored < 0 || int64(h.stored) > c.pages.end-c.pages.off {
			return nil
		}
		c.pages.off += int64(h.stored)
	}
	return nil
}
