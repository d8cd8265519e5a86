// Package geoparquet reads points from the geometry columns of Parquet files,
// and writes the layers of a release as GeoParquet 1.1.
//
// Notation: a geometry column g, binary (WKB) or stored as numbers, becomes the
// two numeric columns g.x and g.y. Declared are such columns by the "geo" entry
// of GeoParquet 1.0, 1.1 and 2.0, or by Parquet's own types GEOMETRY and
// GEOGRAPHY without one. An empty point is events.Null, another geometry
// events.OtherShape, bytes that are no geometry events.NotAValue.
//
// Units: those of the column's CRS, x first whatever the CRS says of its axes.
// An absent CRS means longitude and latitude, a null one that it is unknown.
//
// Sources: OGC GeoParquet 1.1; Parquet's geospatial definitions; WKB in OGC
// 06-103r4 and ISO 19125, with the flags that others add for Z, M and SRID.
//
// Cost: that of parquetfile, and some nanoseconds a point; a binary column is
// unpacked once however many of its columns are asked for.
package geoparquet
