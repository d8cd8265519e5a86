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
//
// # Writing
//
// A layer has the columns id, geometry (WKB, little-endian, exterior rings
// anticlockwise), bbox (a group of xmin, ymin, xmax, ymax, which the metadata
// names as the geometry's covering) and those of the GeoJSON file; what is not
// known is null. Positions are longitude and latitude on WGS 84 (the format's
// default, OGC:CRS84), or metres with a null CRS.
//
// Everything is zstd, one row group to a million rows, and the same input gives
// the same bytes.
//
// Source: GeoParquet 1.1.0 (OGC); its metadata schema is checked in the tests.
package geoparquet
