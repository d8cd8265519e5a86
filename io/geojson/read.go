package geojson

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strings"

	"github.com/paulmach/orb"
)

// Kinds of error a reader returns, to be told apart with errors.Is.
var (
	// ErrMalformed: the bytes break JSON or RFC 7946.
	ErrMalformed = errors.New("geojson malformed")
	// ErrUnsupported: legal GeoJSON, but not polygons in WGS 84 degrees.
	ErrUnsupported = errors.New("geojson not supported")
	// ErrTooLarge: more than the reader's limits allow.
	ErrTooLarge = errors.New("geojson too large")
)

// Named is one feature with polygons.
type Named struct {
	ID         string // the feature's id as text, "" without one
	Properties map[string]any
	Shape      orb.MultiPolygon // closed rings, exteriors anticlockwise, holes clockwise
}

// Name returns the text of the first of the given properties that is a
// non-empty string or a number, else the id.
func (n Named) Name(keys ...string) string {
	for _, k := range keys {
		switch v := n.Properties[k].(type) {
		case string:
			if v != "" {
				return v
			}
		case json.Number:
			return v.String()
		}
	}
	return n.ID
}

// Reader reads polygons. The zero value reads degrees with the default limits.
type Reader struct {
	Plane        bool  // positions are metres: no range check
	MaxBytes     int64 // of the text; 0 means 256 MiB
	MaxPositions int   // in all; 0 means 10 million
}

// ReadPolygons reads the polygons of a GeoJSON text in WGS 84 degrees with the
// default limits: a FeatureCollection, a Feature, a GeometryCollection, a
// MultiPolygon or a Polygon. See Reader.Polygons.
func ReadPolygons(r io.Reader) ([]Named, error) { return Reader{}.Polygons(r) }

// Polygons reads one GeoJSON text. Features without a geometry are skipped.
// Rings wound the wrong way are rewound, a third coordinate is dropped, holes
// without area are dropped. Longitudes may run to 360 either way. Errors name
// the feature, polygon, ring and position, counted from 1; an open ring, an
// exterior without area, another geometry type, another CRS, or no polygon at
// all is an error.
func (o Reader) Polygons(r io.Reader) ([]Named, error) {
	if o.MaxBytes <= 0 {
		o.MaxBytes = 256 << 20
	}
	if o.MaxPositions <= 0 {
		o.MaxPositions = 10_000_000
	}
	data, err := io.ReadAll(io.LimitReader(r, o.MaxBytes+1))
	if err != nil {
		return nil, fmt.Errorf("geojson: read: %w", err)
	}
	if int64(len(data)) > o.MaxBytes {
		return nil, fmt.Errorf("geojson: more than %d bytes; simplify the polygons or split the file: %w", o.MaxBytes, ErrTooLarge)
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	p := &polygonReader{opt: o, left: o.MaxPositions}
	if err := p.document(data); err != nil {
		return nil, fmt.Errorf("geojson: %w", err)
	}
	if len(p.out) == 0 {
		return nil, fmt.Errorf("geojson: no polygon in it: %w", ErrUnsupported)
	}
	return p.out, nil
}

type polygonReader struct {
	opt  Reader
	left int // positions still allowed
	out  []Named
}

type object map[string]json.RawMessage

func (p *polygonReader) document(data []byte) error {
	o, err := asObject(data)
	if err != nil {
		return err
	}
	if crs, ok := o["crs"]; ok && !p.opt.Plane && !knownCRS(crs) {
		return fmt.Errorf("crs member %.120s; GeoJSON is WGS 84 longitude and latitude (RFC 7946), convert the file first: %w", crs, ErrUnsupported)
	}
	switch t := o.text("type"); t {
	case "FeatureCollection":
		var features []json.RawMessage
		if err := json.Unmarshal(o["features"], &features); err != nil || o["features"] == nil {
			return fmt.Errorf("features is not an array: %w", ErrMalformed)
		}
		for i, f := range features {
			if err := p.feature(f); err != nil {
				return fmt.Errorf("feature %d: %w", i+1, err)
			}
		}
		return nil
	case "Feature":
		return p.feature(data)
	default:
		var n Named
		if err := p.geometry(data, &n.Shape, 0); err != nil {
			return err
		}
		if len(n.Shape) > 0 {
			p.out = append(p.out, n)
		}
		return nil
	}
}

func (p *polygonReader) feature(data []byte) error {
	o, err := asObject(data)
	if err != nil {
		return err
	}
	if t := o.text("type"); t != "Feature" {
		return fmt.Errorf("type is %.40q, not Feature: %w", t, ErrMalformed)
	}
	var n Named
	switch id := bytes.TrimSpace(o["id"]); {
	case len(id) == 0 || string(id) == "null":
	case id[0] == '"':
		n.ID = o.text("id")
	case id[0] == '-' || id[0] >= '0' && id[0] <= '9':
		n.ID = string(id)
	default:
		return fmt.Errorf("id is neither a string nor a number: %w", ErrMalformed)
	}
	if props := o["properties"]; props != nil {
		dec := json.NewDecoder(bytes.NewReader(props))
		dec.UseNumber()
		if err := dec.Decode(&n.Properties); err != nil {
			return fmt.Errorf("properties is not an object: %w", ErrMalformed)
		}
	}
	g := bytes.TrimSpace(o["geometry"])
	if len(g) == 0 {
		return fmt.Errorf("geometry is missing: %w", ErrMalformed)
	}
	if string(g) == "null" {
		return nil
	}
	if err := p.geometry(g, &n.Shape, 0); err != nil {
		return err
	}
	if len(n.Shape) > 0 {
		p.out = append(p.out, n)
	}
	return nil
}

// geometry appends the polygons of one geometry to mp.
func (p *polygonReader) geometry(data []byte, mp *orb.MultiPolygon, depth int) error {
	o, err := asObject(data)
	if err != nil {
		return err
	}
	c := &scanner{data: o["coordinates"], r: p}
	switch t := o.text("type"); t {
	case "Polygon":
		poly, err := c.polygon()
		if err != nil {
			return err
		}
		if poly != nil {
			*mp = append(*mp, poly)
		}
		return nil
	case "MultiPolygon":
		return c.list("polygon", func() error {
			poly, err := c.polygon()
			if err == nil && poly != nil {
				*mp = append(*mp, poly)
			}
			return err
		})
	case "GeometryCollection":
		var parts []json.RawMessage
		if err := json.Unmarshal(o["geometries"], &parts); err != nil || o["geometries"] == nil {
			return fmt.Errorf("geometries is not an array: %w", ErrMalformed)
		}
		if depth > 3 {
			return fmt.Errorf("geometry collections nested deeper than 4: %w", ErrUnsupported)
		}
		for i, g := range parts {
			if err := p.geometry(g, mp, depth+1); err != nil {
				return fmt.Errorf("geometry %d: %w", i+1, err)
			}
		}
		return nil
	case "Point", "MultiPoint", "LineString", "MultiLineString":
		return fmt.Errorf("a %s where polygons are needed: %w", t, ErrUnsupported)
	case "Topology":
		return fmt.Errorf("this is TopoJSON; convert it to GeoJSON first: %w", ErrUnsupported)
	default:
		return fmt.Errorf("type is %.40q, not a GeoJSON type: %w", t, ErrMalformed)
	}
}

func asObject(data []byte) (object, error) {
	var o object
	if err := json.Unmarshal(data, &o); err != nil {
		var at *json.SyntaxError
		if errors.As(err, &at) {
			return nil, fmt.Errorf("byte %d: %w: %w", at.Offset, err, ErrMalformed)
		}
		return nil, fmt.Errorf("not a JSON object: %w", ErrMalformed)
	}
	if o == nil {
		return nil, fmt.Errorf("null where an object is needed: %w", ErrMalformed)
	}
	return o, nil
}

// text returns a member that is a string, else "".
func (o object) text(name string) string {
	var s string
	if json.Unmarshal(o[name], &s) != nil {
		return ""
	}
	return s
}

// knownCRS accepts the old crs member where it says what RFC 7946 implies.
func knownCRS(raw json.RawMessage) bool {
	var c struct {
		Properties struct {
			Name string `json:"name"`
		} `json:"properties"`
	}
	if string(bytes.TrimSpace(raw)) == "null" {
		return true
	}
	if json.Unmarshal(raw, &c) != nil {
		return false
	}
	n := strings.ToUpper(c.Properties.Name)
	return strings.HasSuffix(n, "CRS84") || n == "EPSG:4326" || n == "URN:OGC:DEF:CRS:EPSG::4326"
}
