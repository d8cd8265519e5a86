// Package geotiff writes a released surface as a cloud-optimized GeoTIFF.
//
// One float32 band, events per square kilometre, not-a-number where there is
// nothing; row 0 is the northernmost; each lattice node is the centre of a
// pixel, so the corner of the raster lies half a step outside the first node
// (PixelIsArea). Tiles of 256 (512 from 2048 nodes on), deflate with the
// floating-point predictor, overviews by the mean of the valid pixels among 2
// by 2. File order: all image directories from full to smallest, then the data
// of the smallest overview up to the full resolution.
//
// The CRS is the EPSG code, or the projection's own parameters on WGS 84 where
// the plane has no code. A plane without a place is a local engineering CRS in
// metres, with no geographic keys.
//
// Cost: linear in the nodes; about 35 ns a node on one core, 20 on two. Memory: the compressed
// file, one strip of tiles per overview, a few tiles per worker. The bytes do
// not depend on the workers.
//
// Sources: TIFF 6.0; TIFF Technical Note 3 (predictor 3); OGC 19-008r4
// (GeoTIFF 1.1); OGC 21-026 (cloud-optimized GeoTIFF); RFC 1950 (zlib).
package geotiff
