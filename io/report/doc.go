// Package report draws what a person opens: report.html, one self-contained
// page a bundle, and the same map as a PNG picture. Both are drawn from
// spatial.Release, so nothing the guard kept back can appear.
//
// Notation and units. The map is drawn on the plane of the estimate, metres.
// One drawing unit is a quarter of a pixel of a map 960 pixels wide; rings are
// thinned to within one unit and rounded to whole units. H is the bandwidth
// matrix, c a factor of it. Intensities are kept in events per square
// kilometre and shown in the unit of area that gives readable numbers. Each
// number on the page that also stands in a file of the bundle is a data
// element: value is the file's own number, data-of names the member
// ("region-50/area_km2" in regions.geojson, "run/bandwidth/major_m" in
// run.json).
//
// The page needs no network and no script: layers are switched by the style
// sheet, a small script adds the reading of places. A content security policy
// allows the page's own style and script by their SHA-256 and nothing else.
// Text from outside (names of files and columns, notes) is escaped, isolated
// from the direction of the text around it, and its control characters are
// shown by number. Equal records and releases give equal bytes, but for the
// section "This run", which repeats inputs, workers and times.
//
// Colours: a ramp computed in OKLCH with lightness linear in the band's number
// (see ramp.go); falling on a light page, rising on a dark one.
//
//	step                       cost
//	thinning of rings          O(v log v) usual, v vertices
//	graticule                  64 projected positions a line
//	page                       O(v); about 2 to 4 bytes a kept coordinate
//	picture                    O(pixels · bands)
//
// Sources: Douglas and Peucker 1973, Cartographica 10, 112-122 (thinning);
// Ottosson 2020, "A perceptual color space for image processing" (OKLab);
// Viénot, Brettel and Mollon 1999, Color Research and Application 24, 243-252
// (colour vision deficiencies, used by the tests); Wand and Jones 1995,
// section 4.3 (AMISE as a function of H); W3C Content Security Policy 3;
// WCAG 2.2.
package report
