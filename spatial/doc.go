// Package spatial goes from longitude and latitude to regions one can hand
// over, and back: map projections, study areas, level sets as polygons, peaks,
// and the small-number guard before anything leaves.
//
// # Units
//
// LonLat and LonLats are degrees, longitude first; XY and XYs are metres, east
// first. The two are different types and nothing converts between them but a
// Projection. Areas are square metres unless a name says KM2. Densities are
// per square metre unless a name says PerKM2.
//
// # Projections
//
// A Projection works on whole columns in place and allocates nothing. Outside
// its domain it writes NaN to both columns. Within it, there and back again
// closes to 1e-6 m, but where the plane itself runs out of digits: 1e-4 m within
// a degree of the antipode of LAEA; 1e-5 m at 0.1 degrees from the poles of AEA,
// which flattens latitude there, and 0.4 m at the poles themselves.
//
//	method        EPSG       equal-area  domain                            there, back (about, ns a point)
//	LAEA          9820       yes         all but 320 m about the antipode  100, 80
//	TM, UTM       9807       no          45 degrees off the meridian       200, 220
//	AEA           9822       yes         all                               90, 90
//	LCC           9801/9802  no          all but the far pole              230, 230
//	WebMercator   1024       no          85.06 degrees N and S             120, 100
//	plane         -          yes         all: numbers pass unchanged       0, 0
//
// All are ellipsoidal. The plane for the estimate is chosen by ChooseCentre or
// CentreCounter and AutoPlane: equal-area, so that a density per square metre
// means the same everywhere on it. Datums within 2 m of WGS 84 are taken as
// one (LookupCRS lists them); those further off are refused by name.
//
// Notation: φ, λ geographic latitude and longitude; β authalic, χ conformal,
// ψ isometric latitude; a, f, e, n semi-major axis, flattening, eccentricity,
// third flattening; Rq authalic radius.
//
// Sources: IOGP Publication 373-7-2, "Coordinate conversions and
// transformations including formulas"; Snyder, "Map projections: a working
// manual", USGS Professional Paper 1395 (1987); Karney, "Transverse Mercator
// with an accuracy of a few nanometers", Journal of Geodesy 85 (2011); Karney,
// "On auxiliary latitudes" (2022). Checked against PROJ and the IOGP GIGS test
// series; see testdata.
//
// # Level sets and the guard
//
// NewIsolines draws all level curves of a lattice function at once: O(nodes)
// with one byte a node, then O(vertices). Curves never meet, at one level or
// two, and nest as a forest of faces. Each face knows its area, its mass (the
// bilinear interpolant, exactly) and its events with bounds read from the count
// nodes. Guard dissolves faces that do not certainly hold enough events, builds
// regions and bands from what is left, and is the only maker of a Release.
// ToShape rounds to 1e-7 degree, cuts at the antimeridian and goes over poles;
// that no two rings meet is checked in whole numbers. Sources: the asymptotic
// decider, Nielson and Hamann 1991 (from memory); RFC 7946; OGC 06-103r4.
//
// # Study area
//
// StudyArea is where events could be observed. KernelMass gives p_H(x), the part
// of a kernel that lies inside; Renormalise divides the density by it, Conserve
// weights the events by its inverse. With Analysis.Area, Guard cuts the study
// area into faces by the level curves and releases nothing beyond its border.
// Cost: Mask O(nodes + border cells), KernelMass two transforms, the cut
// O((vertices + border cells) log). Sources: Diggle 1985 and Jones 1993 for the
// two corrections; Green's theorem for integrals over faces.
package spatial
