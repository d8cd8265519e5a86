// Package geojson writes a release as GeoJSON and reads polygons from it.
//
// Written: one FeatureCollection per kind (regions, contours, peaks), one
// feature a line. Positions are WGS 84 degrees, longitude first, or metres on a
// plane without a place, which the foreign member "drumlin" then says. They are
// rounded to whole quanta of 10^-7 (fewer decimals on request); after that,
// repeated positions, spikes and rings without area are dropped, exterior rings
// run anticlockwise and holes clockwise. A position outside the degree range is
// an error: shapes arrive cut at the antimeridian. Numbers in properties have 7
// significant digits; counts of events are whole, their bounds rounded outward;
// what JSON cannot hold (the upper end of the highest band) is null.
//
// Cost: linear in positions, two passes, 16 bytes a position on top of the
// release; over 100 MB/s on one core.
//
// Sources: RFC 7946 (GeoJSON), RFC 7493 (I-JSON), OGC 06-103r4 (what a valid
// polygon is).
package geojson
