package geotiff

import (
	"context"
	"encoding/binary"
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"strings"
)

// TIFF tags, in rising order as a directory needs them.
const (
	tagSubfileType   = 254
	tagWidth         = 256
	tagHeight        = 257
	tagBits          = 258
	tagCompression   = 259
	tagPhotometric   = 262
	tagSamples       = 277
	tagPlanar        = 284
	tagPredictor     = 317
	tagTileWidth     = 322
	tagTileHeight    = 323
	tagTileOffsets   = 324
	tagTileSizes     = 325
	tagSampleFormat  = 339
	tagPixelScale    = 33550
	tagTiePoint      = 33922
	tagGeoDirectory  = 34735
	tagGeoDoubles    = 34736
	tagGeoASCII      = 34737
	tagBandMetadata  = 42112
	tagNoData        = 42113
	deflate          = 8
	floatPredictor   = 3
	floatSamples     = 3
	blackIsZero      = 1
	chunkyPlanes     = 1
	reducedImage     = 1
	typeASCII        = 2
	typeShort        = 3
	typeLong         = 4
	typeDouble       = 12
	headerBytes      = 8
	entryBytes       = 12
	directoryBorders = 6 // entry count and the offset of the next directory
)

// layout lays the file out: header, directories, data.
type layout struct {
	levels      []*level
	opt         Options
	keys        *keySet
	west, north float64 // corner of the raster
	step        [2]float64
}

// field is one entry of a directory with its values in bytes.
type field struct {
	tag, typ uint16
	count    uint32
	data     []byte
}

func shorts(tag uint16, v ...uint16) field {
	f := field{tag: tag, typ: typeShort, count: uint32(len(v))}
	for _, x := range v {
		f.data = binary.LittleEndian.AppendUint16(f.data, x)
	}
	return f
}

func longs(tag uint16, v ...uint32) field {
	f := field{tag: tag, typ: typeLong, count: uint32(len(v))}
	for _, x := range v {
		f.data = binary.LittleEndian.AppendUint32(f.data, x)
	}
	return f
}

func doubles(tag uint16, v ...float64) field {
	f := field{tag: tag, typ: typeDouble, count: uint32(len(v))}
	for _, x := range v {
		f.data = binary.LittleEndian.AppendUint64(f.data, math.Float64bits(x))
	}
	return f
}

func text(tag uint16, s string) field {
	return field{tag, typeASCII, uint32(len(s) + 1), append([]byte(s), 0)}
}

// fields returns the directory of level k, given where its tiles begin.
func (f *layout) fields(k int, offsets []uint32) []field {
	l := f.levels[k]
	sizes := make([]uint32, len(l.tiles))
	for i, t := range l.tiles {
		sizes[i] = uint32(len(t))
	}
	var kind uint32
	if k > 0 {
		kind = reducedImage
	}
	out := []field{
		longs(tagSubfileType, kind),
		longs(tagWidth, uint32(l.w)),
		longs(tagHeight, uint32(l.h)),
		shorts(tagBits, 32),
		shorts(tagCompression, deflate),
		shorts(tagPhotometric, blackIsZero),
		shorts(tagSamples, 1),
		shorts(tagPlanar, chunkyPlanes),
		shorts(tagPredictor, floatPredictor),
		shorts(tagTileWidth, uint16(f.opt.Tile)),
		shorts(tagTileHeight, uint16(f.opt.Tile)),
		longs(tagTileOffsets, offsets...),
		longs(tagTileSizes, sizes...),
		shorts(tagSampleFormat, floatSamples),
	}
	if k == 0 {
		out = append(out,
			doubles(tagPixelScale, f.step[0], f.step[1], 0),
			doubles(tagTiePoint, 0, 0, 0, f.west, f.north, 0),
			shorts(tagGeoDirectory, f.keys.directory()...))
		if len(f.keys.doubles) > 0 {
			out = append(out, doubles(tagGeoDoubles, f.keys.doubles...))
		}
		if f.keys.ascii != "" {
			out = append(out, text(tagGeoASCII, f.keys.ascii))
		}
		out = append(out, text(tagBandMetadata, bandMetadata(f.opt)))
	}
	return append(out, text(tagNoData, "nan"))
}

// bandMetadata is the unit and the description of the band, in the XML form
// that raster software reads from tag 42112.
func bandMetadata(o Options) string {
	var b strings.Builder
	item := func(name, role, value string) {
		fmt.Fprintf(&b, `<Item name="%s" sample="0" role="%s">`, name, role)
		_ = xml.EscapeText(&b, []byte(value)) // a Builder does not fail
		b.WriteString("</Item>")
	}
	b.WriteString("<GDALMetadata>")
	item("DESCRIPTION", "description", o.Description)
	item("UNITTYPE", "unittype", o.Unit)
	b.WriteString("</GDALMetadata>")
	return b.String()
}

// size of a directory with the values that lie outside its entries.
func size(fields []field) int64 {
	n := int64(directoryBorders + entryBytes*len(fields))
	for _, f := range fields {
		if len(f.data) > 4 {
			n += int64(len(f.data)+1) &^ 1
		}
	}
	return n
}

// write puts the file out: directories from the full image down, then the data
// from the smallest overview up.
func (f *layout) write(ctx context.Context, w io.Writer) error {
	at := int64(headerBytes)
	begin := make([]int64, len(f.levels))
	for k, l := range f.levels {
		begin[k] = at
		at += size(f.fields(k, make([]uint32, len(l.tiles))))
	}
	end := at
	offsets := make([][]uint32, len(f.levels))
	for k := len(f.levels) - 1; k >= 0; k-- {
		for _, t := range f.levels[k].tiles {
			if end+int64(len(t)) > math.MaxUint32 {
				return fmt.Errorf("geotiff: the file would pass 4 GiB; use a coarser lattice: %w", ErrTooLarge)
			}
			offsets[k] = append(offsets[k], uint32(end))
			end += int64(len(t))
		}
	}
	head := make([]byte, 0, at)
	head = append(head, 'I', 'I', 42, 0)
	head = binary.LittleEndian.AppendUint32(head, headerBytes)
	for k := range f.levels {
		next := uint32(0)
		if k+1 < len(f.levels) {
			next = uint32(begin[k+1])
		}
		head = appendDirectory(head, f.fields(k, offsets[k]), next)
	}
	if _, err := w.Write(head); err != nil {
		return fmt.Errorf("geotiff: %w", err)
	}
	for k := len(f.levels) - 1; k >= 0; k-- {
		for _, t := range f.levels[k].tiles {
			if ctx.Err() != nil {
				return context.Cause(ctx)
			}
			if _, err := w.Write(t); err != nil {
				return fmt.Errorf("geotiff: %w", err)
			}
		}
	}
	return nil
}

// appendDirectory appends a directory at the end of b and, after it, the
// values that do not fit into its entries.
func appendDirectory(b []byte, fields []field, next uint32) []byte {
	le := binary.LittleEndian
	outside := len(b) + directoryBorders + entryBytes*len(fields)
	var values []byte
	b = le.AppendUint16(b, uint16(len(fields)))
	for _, f := range fields {
		b = le.AppendUint16(b, f.tag)
		b = le.AppendUint16(b, f.typ)
		b = le.AppendUint32(b, f.count)
		if len(f.data) <= 4 {
			b = append(b, f.data...)
			b = append(b, make([]byte, 4-len(f.data))...)
			continue
		}
		b = le.AppendUint32(b, uint32(outside+len(values)))
		values = append(values, f.data...)
		if len(values)%2 == 1 {
			values = append(values, 0)
		}
	}
	b = le.AppendUint32(b, next)
	return append(b, values...)
}
