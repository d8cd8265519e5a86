// Package flatgeobuf writes layers as FlatGeobuf, version 3: a header, a packed
// Hilbert R-tree over the features' boxes (16 to a node), and the features in
// the order of the tree's leaves.
//
// Positions are WGS 84 degrees (EPSG:4326, longitude first), or metres without
// a CRS. Absent values are left out. The same layer gives the same bytes.
//
// Cost: one pass over positions; the encoded file is held in memory.
//
// Source: the FlatGeobuf specification, version 3.0 (schemas header.fbs and
// feature.fbs, layout of the index), from memory; checked by GDAL's reader.
package flatgeobuf

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	flatbuffers "github.com/google/flatbuffers/go"
	"github.com/paulmach/orb"

	"drumlin/io/layers"
	"drumlin/spatial"
)

// ErrUnsupported reports a geometry that is not a point or a multipolygon.
var ErrUnsupported = errors.New("geometry not supported by this writer")

var magic = []byte{'f', 'g', 'b', 3, 'f', 'g', 'b', 0}

// Geometry and column types of the format.
const (
	typePoint        = 1
	typePolygon      = 3
	typeMultiPolygon = 6

	columnLong   = 7
	columnDouble = 10
	columnString = 11
)

// Write writes one layer of a release, by its name in layers.Names.
func Write(w io.Writer, r *spatial.Release, name string, m layers.Meta) error {
	l := layers.Of(r, name, m)
	return write(w, &l)
}

func write(w io.Writer, l *layers.Layer) error {
	boxes := make([]orb.Bound, len(l.Features))
	for i, f := range l.Features {
		boxes[i] = f.Shape.Bound()
	}
	extent, _ := l.Bound()
	order := hilbertOrder(boxes, extent)
	features := make([][]byte, len(order))
	items := make([]node, len(order))
	var at uint64
	for n, i := range order {
		b, err := encodeFeature(l, &l.Features[i])
		if err != nil {
			return fmt.Errorf("flatgeobuf: %s: %s: %w", l.Name, l.Features[i].ID, err)
		}
		features[n] = b
		items[n] = node{boxes[i], at}
		at += uint64(len(b))
	}
	out := append([]byte(nil), magic...)
	out = append(out, encodeHeader(l, extent)...)
	out = appendIndex(out, items)
	if _, err := w.Write(out); err != nil {
		return fmt.Errorf("flatgeobuf: %s: %w", l.Name, err)
	}
	for _, b := range features {
		if _, err := w.Write(b); err != nil {
			return fmt.Errorf("flatgeobuf: %s: %w", l.Name, err)
		}
	}
	return nil
}

// fields are the columns: id and then those of the layer.
func fields(l *layers.Layer) []layers.Field {
	return append([]layers.Field{{Name: "id", Kind: layers.Text}}, l.Fields...)
}

func encodeHeader(l *layers.Layer, extent orb.Bound) []byte {
	b := flatbuffers.NewBuilder(1024)
	var columns []flatbuffers.UOffsetT
	for i, f := range fields(l) {
		name := b.CreateString(f.Name)
		b.StartObject(11)
		b.PrependUOffsetTSlot(0, name, 0)
		kind := map[layers.Kind]byte{layers.Text: columnString, layers.Number: columnDouble, layers.Whole: columnLong}[f.Kind]
		b.PrependByteSlot(1, kind, 0)
		if i == 0 {
			b.PrependBoolSlot(7, false, true) // not nullable
			b.PrependBoolSlot(8, true, false) // unique
		}
		columns = append(columns, b.EndObject())
	}
	b.StartVector(4, len(columns), 4)
	for i := len(columns) - 1; i >= 0; i-- {
		b.PrependUOffsetT(columns[i])
	}
	cols := b.EndVector(len(columns))
	var envelope flatbuffers.UOffsetT
	if len(l.Features) > 0 {
		envelope = doubles(b, []float64{extent.Min[0], extent.Min[1], extent.Max[0], extent.Max[1]})
	}
	var crs flatbuffers.UOffsetT
	if !l.Plane {
		org, name := b.CreateString("EPSG"), b.CreateString("WGS 84")
		b.StartObject(6)
		b.PrependUOffsetTSlot(0, org, 0)
		b.PrependInt32Slot(1, 4326, 0)
		b.PrependUOffsetTSlot(2, name, 0)
		crs = b.EndObject()
	}
	name, title := b.CreateString(l.Name), b.CreateString(l.Title)
	kind := byte(typeMultiPolygon)
	if l.Points {
		kind = typePoint
	}
	size := uint16(nodeSize)
	if len(l.Features) == 0 {
		size = 0 // no index over nothing
	}
	b.StartObject(14)
	b.PrependUint64Slot(8, uint64(len(l.Features)), 0)
	b.PrependUOffsetTSlot(0, name, 0)
	b.PrependUOffsetTSlot(1, envelope, 0)
	b.PrependUOffsetTSlot(7, cols, 0)
	b.PrependUOffsetTSlot(10, crs, 0)
	b.PrependUOffsetTSlot(11, title, 0)
	b.PrependUint16Slot(9, size, nodeSize)
	b.PrependByteSlot(2, kind, 0)
	b.FinishSizePrefixed(b.EndObject())
	return b.FinishedBytes()
}

func doubles(b *flatbuffers.Builder, v []float64) flatbuffers.UOffsetT {
	b.StartVector(8, len(v), 8)
	for i := len(v) - 1; i >= 0; i-- {
		b.PrependFloat64(v[i])
	}
	return b.EndVector(len(v))
}

func encodeFeature(l *layers.Layer, f *layers.Feature) ([]byte, error) {
	b := flatbuffers.NewBuilder(4096)
	shape, err := encodeGeometry(b, f.Shape)
	if err != nil {
		return nil, err
	}
	props := b.CreateByteVector(encodeValues(l, f))
	b.StartObject(3)
	b.PrependUOffsetTSlot(0, shape, 0)
	b.PrependUOffsetTSlot(1, props, 0)
	b.FinishSizePrefixed(b.EndObject())
	return b.FinishedBytes(), nil
}

func encodeGeometry(b *flatbuffers.Builder, g orb.Geometry) (flatbuffers.UOffsetT, error) {
	switch g := g.(type) {
	case orb.Point:
		xy := doubles(b, g[:])
		return table(b, 0, xy, typePoint, 0), nil
	case orb.MultiPolygon:
		var parts []flatbuffers.UOffsetT
		for _, p := range g {
			parts = append(parts, encodePolygon(b, p))
		}
		b.StartVector(4, len(parts), 4)
		for i := len(parts) - 1; i >= 0; i-- {
			b.PrependUOffsetT(parts[i])
		}
		return table(b, 0, 0, typeMultiPolygon, b.EndVector(len(parts))), nil
	}
	return 0, fmt.Errorf("a %s: %w", g.GeoJSONType(), ErrUnsupported)
}

func encodePolygon(b *flatbuffers.Builder, p orb.Polygon) flatbuffers.UOffsetT {
	var xy []float64
	var ends []uint32
	for _, r := range p {
		for _, v := range r {
			xy = append(xy, v[0], v[1])
		}
		ends = append(ends, uint32(len(xy)/2))
	}
	at := doubles(b, xy)
	var end flatbuffers.UOffsetT
	if len(ends) > 1 {
		b.StartVector(4, len(ends), 4)
		for i := len(ends) - 1; i >= 0; i-- {
			b.PrependUint32(ends[i])
		}
		end = b.EndVector(len(ends))
	}
	return table(b, end, at, typePolygon, 0)
}

// table ends a geometry.
func table(b *flatbuffers.Builder, ends, xy flatbuffers.UOffsetT, kind byte, parts flatbuffers.UOffsetT) flatbuffers.UOffsetT {
	b.StartObject(8)
	b.PrependUOffsetTSlot(0, ends, 0)
	b.PrependUOffsetTSlot(1, xy, 0)
	b.PrependUOffsetTSlot(7, parts, 0)
	b.PrependByteSlot(6, kind, 0)
	return b.EndObject()
}

// encodeValues writes the number of the column before each value.
func encodeValues(l *layers.Layer, f *layers.Feature) []byte {
	var out []byte
	put := func(column int, v any) {
		if v == nil {
			return
		}
		out = binary.LittleEndian.AppendUint16(out, uint16(column))
		switch v := v.(type) {
		case string:
			out = binary.LittleEndian.AppendUint32(out, uint32(len(v)))
			out = append(out, v...)
		case float64:
			out = binary.LittleEndian.AppendUint64(out, math.Float64bits(v))
		case int64:
			out = binary.LittleEndian.AppendUint64(out, uint64(v))
		}
	}
	put(0, f.ID)
	for i := range l.Fields {
		put(i+1, f.Values[i])
	}
	return out
}
