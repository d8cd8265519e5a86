package parquetfile

import (
	"errors"
	"fmt"
	"hash/crc32"
	"io"
)

// Page types and encodings as the format numbers them.
const (
	pageData   = 0
	pageDict   = 2
	pageDataV2 = 3

	encPlain           = 0
	encPlainDict       = 2
	encRLE             = 3
	encBitPacked       = 4
	encDeltaBinary     = 5
	encDeltaLength     = 6
	encDeltaBytes      = 7
	encRLEDict         = 8
	encByteStreamSplit = 9
)

const (
	windowBytes    = 64 << 10
	maxHeaderBytes = 4 << 20
	keepBytes      = 16 << 20 // larger buffers are not kept for the next chunk
)

// page is one unpacked page. Its data belongs to the pager until the next call.
type page struct {
	typ, enc       int32
	levelEnc       int32
	values         int32
	nulls          int32 // version 2 only
	rows           int32 // version 2 only
	defLen, repLen int32 // version 2 only
	data           []byte
}

// pager reads the pages of one chunk in file order, through a small window, so
// that memory does not depend on the size of the chunk.
type pager struct {
	r        io.ReaderAt
	off, end int64
	codec    int32
	maxPage  int64
	unpack   *unpacker

	win    []byte // bytes of the file from winOff
	winOff int64
	body   []byte // a stored page that does not fit the window
	data   []byte // an unpacked page
}

// reset points the pager at a chunk; buffers are kept.
func (p *pager) reset(r io.ReaderAt, off, end int64, codec int32, maxPage int64, u *unpacker) {
	p.r, p.off, p.end, p.codec, p.maxPage, p.unpack = r, off, end, codec, maxPage, u
	p.win, p.winOff = p.win[:0], off
}

// release drops buffers that are too large to keep.
func (p *pager) release() {
	p.r, p.unpack = nil, nil
	if cap(p.win) > 4*windowBytes {
		p.win = nil
	}
	if cap(p.body) > keepBytes {
		p.body = nil
	}
	if cap(p.data) > keepBytes {
		p.data = nil
	}
}

// view returns up to n bytes of the chunk from off, at least one.
func (p *pager) view(n int64) ([]byte, error) {
	n = min(n, p.end-p.off)
	if n <= 0 {
		return nil, io.EOF
	}
	have := p.winOff + int64(len(p.win)) - p.off
	if p.off < p.winOff || have < n {
		want := min(max(n, windowBytes), p.end-p.off)
		p.win = grow(p.win, want)
		if err := readFull(p.r, p.win, p.off); err != nil {
			p.win = p.win[:0]
			return nil, err
		}
		p.winOff = p.off
	}
	at := p.off - p.winOff
	return p.win[at:], nil
}

// grow returns a slice of n bytes, on the old memory where it is large enough.
func grow(b []byte, n int64) []byte {
	if int64(cap(b)) >= n {
		return b[:n]
	}
	return make([]byte, n, n+n/8)
}

type pageHeader struct {
	page
	unpacked, stored int32
	crc              uint32
	hasCRC, packed   bool
}

// header reads the header at off and moves past it.
func (p *pager) header() (pageHeader, error) {
	for n := int64(1 << 10); ; n *= 8 {
		b, err := p.view(n)
		if err != nil {
			return pageHeader{}, err
		}
		c := &cursor{b: b}
		h := parseHeader(c)
		if c.err == nil {
			p.off += int64(c.i)
			return h, nil
		}
		if !errors.Is(c.err, errShort) || int64(len(b)) >= p.end-p.off || n > maxHeaderBytes {
			return pageHeader{}, fmt.Errorf("page header at byte %d: %w", p.off, c.err)
		}
	}
}

func parseHeader(c *cursor) pageHeader {
	h := pageHeader{packed: true}
	h.typ, h.stored, h.unpacked = -1, -1, -1
	var last int16
	for {
		id, typ, ok := c.field(&last)
		if !ok {
			return h
		}
		switch {
		case id == 1:
			h.typ = c.i32(typ)
		case id == 2:
			h.unpacked = c.i32(typ)
		case id == 3:
			h.stored = c.i32(typ)
		case id == 4:
			h.crc, h.hasCRC = uint32(c.i32(typ)), true
		case (id == 5 || id == 7 || id == 8) && typ == tStruct:
			parseInner(c, id, &h)
		default:
			c.skip(typ, 0)
		}
	}
}

// parseInner reads the header of a data page, dictionary page or version 2 page.
func parseInner(c *cursor, kind int16, h *pageHeader) {
	var last int16
	for {
		id, typ, ok := c.field(&last)
		if !ok {
			return
		}
		switch {
		case id == 1:
			h.values = c.i32(typ)
		case id == 2 && kind != 8, id == 4 && kind == 8:
			h.enc = c.i32(typ)
		case id == 3 && kind == 5:
			h.levelEnc = c.i32(typ)
		case id == 2 && kind == 8:
			h.nulls = c.i32(typ)
		case id == 3 && kind == 8:
			h.rows = c.i32(typ)
		case id == 5 && kind == 8:
			h.defLen = c.i32(typ)
		case id == 6 && kind == 8:
			h.repLen = c.i32(typ)
		case id == 7 && kind == 8 && (typ == tTrue || typ == tFalse):
			h.packed = typ == tTrue
		default:
			c.skip(typ, 1)
		}
	}
}

// next returns the next dictionary or data page, io.EOF after the last.
func (p *pager) next() (page, error) {
	for {
		h, err := p.header()
		if err != nil {
			return page{}, err
		}
		if h.stored < 0 || h.unpacked < 0 || int64(h.stored) > p.end-p.off {
			return page{}, fmt.Errorf("page of %d bytes, unpacked %d, in a chunk with %d left", h.stored, h.unpacked, p.end-p.off)
		}
		if h.typ != pageData && h.typ != pageDict && h.typ != pageDataV2 {
			p.off += int64(h.stored)
			continue
		}
		if h.values < 0 || h.defLen < 0 || h.repLen < 0 {
			return page{}, errors.New("page header has a negative count")
		}
		if int64(h.stored) > p.maxPage || int64(h.unpacked) > p.maxPage {
			return page{}, &tooLarge{what: "page", size: int64(max(h.stored, h.unpacked)), limit: p.maxPage}
		}
		body, err := p.fetch(int64(h.stored))
		if err != nil {
			return page{}, err
		}
		if h.hasCRC && crc32.ChecksumIEEE(body) != h.crc {
			return page{}, errors.New("page does not match its checksum")
		}
		if err := p.open(&h, body); err != nil {
			return page{}, err
		}
		return h.page, nil
	}
}

// fetch returns the next n stored bytes and moves past them.
func (p *pager) fetch(n int64) ([]byte, error) {
	have := p.winOff + int64(len(p.win)) - p.off
	if have >= n {
		at := p.off - p.winOff
		p.off += n
		return p.win[at : at+n], nil
	}
	p.body = grow(p.body, n)
	k := copy(p.body, p.win[p.off-p.winOff:])
	if err := readFull(p.r, p.body[k:], p.off+int64(k)); err != nil {
		return nil, err
	}
	p.off += n
	return p.body, nil
}

// open unpacks the body of a page.
func (p *pager) open(h *pageHeader, body []byte) error {
	plain := 0
	if h.typ == pageDataV2 {
		levels := int64(h.defLen) + int64(h.repLen)
		if levels > int64(len(body)) || levels > int64(h.unpacked) {
			return errors.New("page is smaller than its levels")
		}
		plain = int(levels)
		if !h.packed {
			plain = len(body)
		}
	}
	if p.codec == codecNone || plain == len(body) {
		if len(body) != int(h.unpacked) {
			return fmt.Errorf("page holds %d bytes, its header says %d", len(body), h.unpacked)
		}
		h.data = body
		return nil
	}
	p.data = grow(p.data, int64(h.unpacked))
	copy(p.data, body[:plain])
	if err := p.unpack.into(p.data[plain:], body[plain:], p.codec); err != nil {
		return err
	}
	h.data = p.data
	return nil
}
