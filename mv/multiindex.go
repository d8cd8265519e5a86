package mv

// MultiIndices returns every multi-index k = (k_1, ..., k_d) with k_1+...+k_d = r,
// in lexicographically descending order: for d = 2, (r,0), (r-1,1), ..., (0,r).
// This is the order of every vector of derivatives or functionals here. There
// are C(r+d-1, d-1) of them.
func MultiIndices(d, r int) [][]int {
	if d < 1 || r < 0 {
		panic("mv: MultiIndices needs d >= 1 and r >= 0")
	}
	var out [][]int
	k := make([]int, d)
	var fill func(axis, left int)
	fill = func(axis, left int) {
		if axis == d-1 {
			k[axis] = left
			out = append(out, append([]int(nil), k...))
			return
		}
		for v := left; v >= 0; v-- {
			k[axis] = v
			fill(axis+1, left-v)
		}
	}
	fill(0, r)
	return out
}

// Multiplicity returns |k|! / (k_1! ... k_d!): how often the partial derivative
// D^k stands in the vector of all |k|-fold derivatives.
func Multiplicity(k []int) float64 {
	m, n := 1.0, 0
	for _, v := range k {
		for i := 1; i <= v; i++ {
			n++
			m *= float64(n) / float64(i)
		}
	}
	return float64(int64(m + 0.5))
}

// multiOrder returns |k|, or -1 when an entry is negative.
func multiOrder(k []int) int {
	r := 0
	for _, v := range k {
		if v < 0 {
			return -1
		}
		r += v
	}
	return r
}
