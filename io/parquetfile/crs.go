package parquetfile

import (
	"encoding/json"
	"fmt"
	"strings"

	"drumlin/io/events"
)

// Geometry is a geometry column that the file declares, by the format's own
// logical type or in the "geo" entry of the file's metadata.
type Geometry struct {
	Name     string   // column or group
	Encoding string   // "WKB", "point", ... as declared
	CRS      string   // as in events.Info
	Primary  bool     // the file calls it its main geometry, or it is the only one
	Types    []string // geometry types the file declares, as "Point Z"; nil if unknown
}

// lonLat is what both conventions mean by an absent CRS.
const lonLat = "OGC:CRS84"

// Geometries lists the declared geometry columns in file order, those of the
// "geo" entry first.
func (f *File) Geometries() []Geometry { return append([]Geometry(nil), f.geoms...) }

// geometries describes them for Info: read here are only points stored as two
// columns of numbers; package geoparquet reads more.
func (f *File) geometries() []events.Geometry {
	var out []events.Geometry
	for _, g := range f.geoms {
		e := events.Geometry{Name: g.Name, Type: g.Encoding, CRS: g.CRS, Primary: g.Primary}
		x, y := f.leafAt(g.Name+".x"), f.leafAt(g.Name+".y")
		if x < 0 || y < 0 || !f.leaves[x].numeric() || !f.leaves[y].numeric() {
			e.Refusal = "is " + g.Encoding + ", not points of two numbers"
		}
		out = append(out, e)
	}
	return out
}

// KeyValue returns an entry of the file's own metadata.
func (f *File) KeyValue(key string) (string, bool) {
	if v := f.meta.KeyValueMetadata().FindValue(key); v != nil {
		return *v, true
	}
	return "", false
}

// describeGeometry fills the geometries and the CRS. Metadata that cannot be
// understood is left aside: the columns stay readable without it.
func (f *File) describeGeometry() {
	seen := map[string]bool{}
	if text, ok := f.KeyValue("geo"); ok {
		var geo struct {
			Primary string `json:"primary_column"`
			Columns map[string]struct {
				Encoding string          `json:"encoding"`
				CRS      json.RawMessage `json:"crs"`
				Types    []string        `json:"geometry_types"`
			} `json:"columns"`
		}
		if json.Unmarshal([]byte(text), &geo) == nil {
			for _, name := range f.topNames() {
				col, ok := geo.Columns[name]
				if !ok {
					continue
				}
				seen[name] = true
				g := Geometry{Name: name, Encoding: col.Encoding, CRS: projJSON(col.CRS), Primary: name == geo.Primary, Types: col.Types}
				f.geoms = append(f.geoms, g)
			}
		}
	}
	for _, l := range f.leaves {
		if l.lost.id != logicalGeometry && l.lost.id != logicalGeography || seen[l.name] {
			continue
		}
		f.geoms = append(f.geoms, Geometry{Name: l.name, Encoding: "WKB", CRS: f.nativeCRS(l.lost.crs)})
	}
	if len(f.geoms) == 1 {
		f.geoms[0].Primary = true
	}
	for i, g := range f.geoms {
		if at := f.leafAt(g.Name); at >= 0 && f.leaves[at].kind == kindCode {
			f.leaves[at].class = events.Plain
		}
		if i == 0 || g.Primary {
			f.crs = g.CRS
		}
	}
}

// topNames lists the fields at the root of the schema, once each.
func (f *File) topNames() []string {
	root := f.meta.Schema.Root()
	var out []string
	seen := map[string]bool{}
	for i := range root.NumFields() {
		if n := root.Field(i).Name(); !seen[n] {
			seen[n] = true
			out = append(out, n)
		}
	}
	return out
}

// projJSON names a CRS by its identifier: absent means longitude and latitude,
// null means unknown. One without an identifier is given by its name.
func projJSON(raw json.RawMessage) string {
	if len(raw) == 0 {
		return lonLat
	}
	var crs struct {
		Name string `json:"name"`
		ID   *struct {
			Authority string          `json:"authority"`
			Code      json.RawMessage `json:"code"`
		} `json:"id"`
	}
	if json.Unmarshal(raw, &crs) != nil {
		return ""
	}
	if crs.ID != nil {
		return fmt.Sprintf("%s:%s", crs.ID.Authority, strings.Trim(string(crs.ID.Code), `"`))
	}
	return crs.Name
}

// nativeCRS reads the CRS of a geometry logical type: empty, an identifier, a
// key of the file's metadata, or PROJJSON in place.
func (f *File) nativeCRS(s string) string {
	if s == "" {
		return lonLat
	}
	if key, ok := strings.CutPrefix(s, "projjson:"); ok {
		if text, ok := f.KeyValue(key); ok {
			s = text
		}
	}
	if strings.HasPrefix(strings.TrimSpace(s), "{") {
		return projJSON(json.RawMessage(s))
	}
	return s
}
