package spatial

import (
	"cmp"
	"fmt"
	"math/bits"
	"slices"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"
)

// checkOGC has a finished shape judged by an independent implementation of the
// rules of OGC Simple Features. It takes some 3 microseconds a position.
func checkOGC(mp orb.MultiPolygon) error {
	polygons := make([]geom.Polygon, len(mp))
	for i, p := range mp {
		rings := make([]geom.LineString, len(p))
		for n, r := range p {
			xy := make([]float64, 0, 2*len(r))
			for _, v := range r {
				xy = append(xy, v[0], v[1])
			}
			rings[n] = geom.NewLineString(geom.NewSequence(xy, geom.DimXY))
		}
		polygons[i] = geom.NewPolygon(rings)
	}
	if err := geom.NewMultiPolygon(polygons).Validate(); err != nil {
		return fmt.Errorf("spatial: %w: %w", errNotValid, err)
	}
	return nil
}

// gridSegment is one side of a ring.
type gridSegment struct {
	a, b           gridPoint
	x0, x1, y0, y1 int64
	ring, n, last  int32 // its place in the ring, and the ring's last place
}

// checkRings returns errTouch unless every ring is simple and no two rings
// meet, not even in a point. Longitudes are compared as they stand. The arithmetic is exact. Strips of latitude, each
// swept by longitude, keep it near n log n for segments of similar length.
func checkRings(rings []gridRing) error {
	var segs []gridSegment
	var total int
	for _, r := range rings {
		total += len(r)
	}
	if total == 0 {
		return nil
	}
	segs = make([]gridSegment, 0, total)
	var tall float64
	lo, hi, left, right := int64(1)<<62, -int64(1)<<62, int64(1)<<62, -int64(1)<<62
	for k, r := range rings {
		winds := r.winds()
		for i, a := range r {
			b := r[0]
			if i+1 < len(r) {
				b = r[i+1]
			} else if winds {
				continue // around a pole: no side back to the first
			}
			s := gridSegment{a: a, b: b, x0: min(a.x, b.x), x1: max(a.x, b.x), y0: min(a.y, b.y), y1: max(a.y, b.y),
				ring: int32(k), n: int32(i), last: int32(len(r) - 1)}
			tall += float64(s.y1 - s.y0)
			lo, hi, left, right = min(lo, s.y0), max(hi, s.y1), min(left, s.x0), max(right, s.x1)
			segs = append(segs, s)
		}
	}
	const maxStrips = 1 << 20
	height := max(1, int64(2*tall/float64(total)), (hi-lo)/maxStrips+1)
	shift := max(0, bits.Len64(uint64(right-left))-40)
	type entry struct {
		key uint64
		seg int32
	}
	entries := make([]entry, 0, total*3/2+1)
	for n := range segs {
		s := &segs[n]
		for k := (s.y0 - lo) / height; k <= (s.y1-lo)/height; k++ {
			entries = append(entries, entry{uint64(k)<<40 | uint64(s.x0-left)>>shift, int32(n)})
		}
	}
	slices.SortFunc(entries, func(a, b entry) int { return cmp.Compare(a.key, b.key) })
	var active []int32
	strip := uint64(0)
	for _, e := range entries {
		if k := e.key >> 40; k != strip {
			strip, active = k, active[:0]
		}
		s := &segs[e.seg]
		keep := active[:0]
		for _, n := range active {
			o := &segs[n]
			if (o.x1-left)>>shift < (s.x0-left)>>shift {
				continue
			}
			keep = append(keep, n)
			if o.y1 < s.y0 || o.y0 > s.y1 || o.x1 < s.x0 || o.x0 > s.x1 {
				continue
			}
			if meet(s, o) {
				return errTouch
			}
		}
		active = append(keep, e.seg)
	}
	return nil
}

// meet reports whether two segments whose boxes overlap share a point they
// should not: any, or for neighbours in a ring any but the common end.
func meet(s, o *gridSegment) bool {
	if s.ring == o.ring {
		if s.n > o.n {
			s, o = o, s
		}
		switch {
		case s.n+1 == o.n:
			return foldedBack(s.a, s.b, o.b)
		case s.n == 0 && o.n == o.last:
			return foldedBack(o.a, o.b, s.b)
		}
	}
	return turnOf(s.a, s.b, o.a)*turnOf(s.a, s.b, o.b) <= 0 && turnOf(o.a, o.b, s.a)*turnOf(o.a, o.b, s.b) <= 0
}

// foldedBack reports whether the way from a by b to c turns straight back.
func foldedBack(a, b, c gridPoint) bool {
	if turnOf(a, b, c) != 0 {
		return false
	}
	return (a.x > b.x && c.x > b.x) || (a.x < b.x && c.x < b.x) || (a.y > b.y && c.y > b.y) || (a.y < b.y && c.y < b.y)
}

// turnOf returns 1 if the way from a by b to c turns left, -1 right, 0 neither.
func turnOf(a, b, c gridPoint) int {
	return compareProducts(b.x-a.x, c.y-a.y, b.y-a.y, c.x-a.x)
}

// compareProducts compares p*q with r*s exactly.
func compareProducts(p, q, r, s int64) int {
	const small = 1 << 31
	if max(p, q, r, s) < small && min(p, q, r, s) > -small {
		return cmp.Compare(p*q, r*s)
	}
	h1, l1 := signedMul(p, q)
	h2, l2 := signedMul(r, s)
	if h1 != h2 {
		return cmp.Compare(h1, h2)
	}
	return cmp.Compare(l1, l2)
}

// signedMul returns the 128-bit product of two signed numbers.
func signedMul(a, b int64) (hi int64, lo uint64) {
	h, l := bits.Mul64(uint64(a), uint64(b))
	if a < 0 {
		h -= uint64(b)
	}
	if b < 0 {
		h -= uint64(a)
	}
	return int64(h), l
}
