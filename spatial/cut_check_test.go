package spatial

import (
	"math/big"
	"math/rand/v2"
	"testing"
)

// slowCheck judges all pairs of sides; it stays as the judge of checkRings.
func slowCheck(rings []gridRing) bool {
	var segs []gridSegment
	for k, r := range rings {
		for i, a := range r {
			b := r[(i+1)%len(r)]
			segs = append(segs, gridSegment{a: a, b: b, ring: int32(k), n: int32(i), last: int32(len(r) - 1),
				x0: min(a.x, b.x), x1: max(a.x, b.x), y0: min(a.y, b.y), y1: max(a.y, b.y)})
		}
	}
	for i := range segs {
		for j := range i {
			s, o := &segs[i], &segs[j]
			if o.y1 < s.y0 || o.y0 > s.y1 || o.x1 < s.x0 || o.x0 > s.x1 {
				continue
			}
			if meet(s, o) {
				return false
			}
		}
	}
	return true
}

func TestCheckRingsAgainstAllPairs(t *testing.T) {
	var good, bad int
	for seed := range 4000 {
		r := rand.New(rand.NewPCG(uint64(seed), 5))
		scale := int64(1) << (3 + r.IntN(30))
		var rings []gridRing
		for range 1 + r.IntN(3) {
			var g gridRing
			for range 3 + r.IntN(2) {
				g = append(g, gridPoint{r.Int64N(2*scale) - scale, r.Int64N(2*scale) - scale})
			}
			if g = tidy(g); g != nil {
				rings = append(rings, g)
			}
		}
		want := slowCheck(rings)
		if got := checkRings(rings) == nil; got != want {
			t.Fatalf("seed %d: checkRings says %v for %v", seed, got, rings)
		}
		if want {
			good++
		} else {
			bad++
		}
	}
	if good < 300 || bad < 300 {
		t.Errorf("%d good and %d bad cases", good, bad)
	}
}

func TestCheckRingsByHand(t *testing.T) {
	square := gridRing{{0, 0}, {10, 0}, {10, 10}, {0, 10}}
	for _, c := range []struct {
		name  string
		rings []gridRing
		ok    bool
	}{
		{"none", nil, true},
		{"a square", []gridRing{square}, true},
		{"a square in a square", []gridRing{square, {{2, 2}, {8, 2}, {8, 8}, {2, 8}}}, true},
		{"a corner on a side", []gridRing{square, {{2, 0}, {8, 2}, {8, 8}}}, false},
		{"a shared corner", []gridRing{square, {{10, 10}, {20, 10}, {20, 20}}}, false},
		{"a shared side", []gridRing{square, {{10, 0}, {20, 0}, {10, 10}}}, false},
		{"crossing", []gridRing{square, {{5, 5}, {15, 5}, {15, 6}}}, false},
		{"a spike", []gridRing{{{0, 0}, {10, 0}, {15, 0}, {10, 0}, {10, 10}}}, false},
		{"a straight run", []gridRing{{{0, 0}, {5, 0}, {10, 0}, {10, 10}}}, true},
		{"a vertex twice", []gridRing{{{0, 0}, {10, 0}, {5, 5}, {10, 10}, {0, 10}, {5, 5}}}, false},
		{"a triangle", []gridRing{{{0, 0}, {10, 0}, {5, 5}}}, true},
	} {
		if ok := checkRings(c.rings) == nil; ok != c.ok {
			t.Errorf("%s: %v, want %v", c.name, ok, c.ok)
		}
	}
}

func TestCompareProducts(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for range 20000 {
		v := func() int64 { return (r.Int64() - 1<<62) >> r.IntN(62) }
		a, b, c, d := v(), v(), v(), v()
		if r.IntN(4) == 0 {
			c, d = b, a
		}
		x := new(big.Int).Mul(big.NewInt(a), big.NewInt(b))
		if want, got := x.Cmp(new(big.Int).Mul(big.NewInt(c), big.NewInt(d))), compareProducts(a, b, c, d); got != want {
			t.Fatalf("%d*%d against %d*%d: %d, want %d", a, b, c, d, got, want)
		}
	}
}
