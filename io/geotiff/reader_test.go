package geotiff_test

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"io"
	"math"
	"testing"
)

// image is what a minimal TIFF reader, written apart from the writer, sees of
// one directory.
type image struct {
	at      uint32 // of the directory in the file
	tags    map[uint16]entry
	w, h    int
	px      []float32
	offsets []uint32
	sizes   []uint32
}

type entry struct {
	typ   uint16
	count uint32
	raw   []byte
}

func (e entry) ints() []uint32 {
	var out []uint32
	for i := range int(e.count) {
		if e.typ == 3 {
			out = append(out, uint32(binary.LittleEndian.Uint16(e.raw[2*i:])))
		} else {
			out = append(out, binary.LittleEndian.Uint32(e.raw[4*i:]))
		}
	}
	return out
}

func (e entry) doubles() []float64 {
	var out []float64
	for i := range int(e.count) {
		out = append(out, math.Float64frombits(binary.LittleEndian.Uint64(e.raw[8*i:])))
	}
	return out
}

func readTIFF(t *testing.T, file []byte) []image {
	t.Helper()
	le := binary.LittleEndian
	if string(file[:4]) != "II*\x00" {
		t.Fatalf("header % x", file[:4])
	}
	var out []image
	for at := le.Uint32(file[4:]); at != 0; {
		im := image{at: at, tags: map[uint16]entry{}}
		n := int(le.Uint16(file[at:]))
		last := uint16(0)
		for i := range n {
			e := file[int(at)+2+12*i:]
			tag, typ, count := le.Uint16(e), le.Uint16(e[2:]), le.Uint32(e[4:])
			if tag <= last {
				t.Fatalf("tag %d after %d: a directory must rise", tag, last)
			}
			last = tag
			size := map[uint16]uint32{2: 1, 3: 2, 4: 4, 12: 8}[typ] * count
			raw := e[8:12]
			if size > 4 {
				o := le.Uint32(raw)
				if o%2 != 0 {
					t.Fatalf("tag %d: value at odd byte %d", tag, o)
				}
				raw = file[o : o+size]
			}
			im.tags[tag] = entry{typ, count, raw}
		}
		im.decode(t, file)
		out = append(out, im)
		at = le.Uint32(file[int(at)+2+12*n:])
	}
	return out
}

func (im *image) decode(t *testing.T, file []byte) {
	t.Helper()
	one := func(tag uint16) int { return int(im.tags[tag].ints()[0]) }
	im.w, im.h = one(256), one(257)
	if one(259) != 8 || one(317) != 3 || one(258) != 32 || one(339) != 3 {
		t.Fatal("not deflated float32 with predictor 3")
	}
	tw, th := one(322), one(323)
	im.offsets, im.sizes = im.tags[324].ints(), im.tags[325].ints()
	across := (im.w + tw - 1) / tw
	im.px = make([]float32, im.w*im.h)
	for k, o := range im.offsets {
		zr, err := zlib.NewReader(bytes.NewReader(file[o : o+im.sizes[k]]))
		if err != nil {
			t.Fatal(err)
		}
		raw, err := io.ReadAll(zr)
		if err != nil || len(raw) != 4*tw*th {
			t.Fatalf("tile %d: %d bytes, %v", k, len(raw), err)
		}
		for r := range th {
			row := raw[4*tw*r : 4*tw*(r+1)]
			for i := 1; i < len(row); i++ {
				row[i] += row[i-1]
			}
			for i := range tw {
				x, y := k%across*tw+i, k/across*th+r
				if x < im.w && y < im.h {
					u := uint32(row[i])<<24 | uint32(row[tw+i])<<16 | uint32(row[2*tw+i])<<8 | uint32(row[3*tw+i])
					im.px[y*im.w+x] = math.Float32frombits(u)
				}
			}
		}
	}
}
