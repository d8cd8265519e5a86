package mv

import (
	"math"
	"math/bits"
)

// uint128 is an exact sum of products of two words.
type uint128 struct{ hi, lo uint64 }

func (u *uint128) addProduct(a, b uint64) {
	hi, lo := bits.Mul64(a, b)
	u.add(uint128{hi, lo})
}

func (u *uint128) add(o uint128) {
	var c uint64
	u.lo, c = bits.Add64(u.lo, o.lo, 0)
	u.hi, _ = bits.Add64(u.hi, o.hi, c)
}

// times returns u*k for a small k.
func (u uint128) times(k uint64) uint128 {
	hi, lo := bits.Mul64(u.lo, k)
	return uint128{hi + u.hi*k, lo}
}

func (u uint128) float() float64 { return math.Ldexp(float64(u.hi), 64) + float64(u.lo) }

// wide is an exact sum of 128-bit numbers, in 192 bits.
type wide struct{ w [3]uint64 }

func (s *wide) addProduct(a, b uint64) {
	hi, lo := bits.Mul64(a, b)
	s.add(wide{[3]uint64{lo, hi, 0}})
}

func (s *wide) add(o wide) {
	var c uint64
	s.w[0], c = bits.Add64(s.w[0], o.w[0], 0)
	s.w[1], c = bits.Add64(s.w[1], o.w[1], c)
	s.w[2], _ = bits.Add64(s.w[2], o.w[2], c)
}

func (s wide) float() float64 {
	return math.Ldexp(float64(s.w[2]), 128) + math.Ldexp(float64(s.w[1]), 64) + float64(s.w[0])
}
