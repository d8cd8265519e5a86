package pipeline

import (
	"context"
	"io"

	"drumlin/io/flatgeobuf"
	"drumlin/io/geojson"
	"drumlin/io/geoparquet"
	"drumlin/io/geotiff"
	"drumlin/io/layers"
	"drumlin/spatial"
)

// output is one file of the bundle in one format.
type output struct {
	format, name string
	write        func(w io.Writer) error
}

// outputs lists every file that may be written, in a fixed order.
func (r *run) outputs(ctx context.Context, rel *spatial.Release, proj spatial.Projection, meta geojson.Meta) []output {
	out := []output{
		{"geojson", "regions.geojson", func(w io.Writer) error { return geojson.WriteRegions(w, rel, meta) }},
		{"geojson", "contours.geojson", func(w io.Writer) error { return geojson.WriteContours(w, rel, meta) }},
		{"geojson", "peaks.geojson", func(w io.Writer) error { return geojson.WritePeaks(w, rel, meta) }},
		{"geojson-seq", "regions.geojsons", func(w io.Writer) error { return geojson.WriteRegionsSequence(w, rel, meta) }},
		{"geojson-seq", "contours.geojsons", func(w io.Writer) error { return geojson.WriteContoursSequence(w, rel, meta) }},
		{"geojson-seq", "peaks.geojsons", func(w io.Writer) error { return geojson.WritePeaksSequence(w, rel, meta) }},
	}
	if len(rel.Zones()) > 0 {
		out = append(out,
			output{"geojson", "zones.geojson", func(w io.Writer) error { return geojson.WriteZones(w, rel, meta) }},
			output{"geojson-seq", "zones.geojsons", func(w io.Writer) error { return geojson.WriteZonesSequence(w, rel, meta) }})
	}
	table := layers.Meta{Weighted: meta.Weighted, Unit: meta.Unit}
	for _, name := range layers.Names() {
		if name == "zones" && len(rel.Zones()) == 0 {
			continue
		}
		out = append(out,
			output{"flatgeobuf", name + ".fgb", func(w io.Writer) error { return flatgeobuf.Write(w, rel, name, table) }},
			output{"geoparquet", name + ".parquet", func(w io.Writer) error { return geoparquet.Write(w, rel, name, table) }})
	}
	return append(out,
		output{"geotiff", "surface.tif", func(w io.Writer) error {
			return geotiff.Write(ctx, w, rel, geotiff.Options{Workers: r.workers, Unit: meta.Unit})
		}},
		output{"parquet", "surface.parquet", func(w io.Writer) error { return geoparquet.WriteSurface(w, rel, proj, meta.Unit) }})
}
