package mv

import "fmt"

// hermiteTable computes the multivariate Hermite factors of a normal density,
// D^k phi_S(x) = (-1)^{|k|} He_k(x) phi_S(x), for a set of multi-indices k. With
// P = S^{-1} and z = Px,
//
//	He_0 = 1,  He_{k+e_i} = z_i He_k - sum_j k_j P_ij He_{k-e_j}.
//
// (Recursion of Holmquist's type, from memory; checked by finite differences.)
// The steps depend on S and the indices only and are laid out flat.
type hermiteTable struct {
	d     int
	p     []float64 // S^{-1}
	steps []hermiteStep
	terms []hermiteTerm
	want  []int // position of each asked index
	sign  []float64
}

type hermiteStep struct {
	axis   int32
	base   int32 // He_{k-e_axis}
	lo, hi int32 // terms to subtract
}

type hermiteTerm struct {
	at int32
	c  float64
}

// newHermiteTable plans the factors of ks, all of length d.
func newHermiteTable(h BandwidthMatrix, ks [][]int) (*hermiteTable, error) {
	t := &hermiteTable{d: h.d, p: h.inv}
	seen := map[string]int32{}
	t.steps = append(t.steps, hermiteStep{axis: -1})
	seen[string(make([]byte, h.d))] = 0
	var need func(k []byte) int32
	need = func(k []byte) int32 {
		if at, ok := seen[string(k)]; ok {
			return at
		}
		axis := 0
		for k[axis] == 0 {
			axis++
		}
		k[axis]--
		step := hermiteStep{axis: int32(axis), base: need(k)}
		var terms []hermiteTerm
		for j := range k {
			if c := float64(k[j]) * h.inv[axis*h.d+j]; k[j] > 0 && c != 0 {
				k[j]--
				terms = append(terms, hermiteTerm{at: need(k), c: c})
				k[j]++
			}
		}
		k[axis]++
		step.lo = int32(len(t.terms))
		t.terms = append(t.terms, terms...)
		step.hi = int32(len(t.terms))
		at := int32(len(t.steps))
		t.steps = append(t.steps, step)
		seen[string(k)] = at
		return at
	}
	for _, k := range ks {
		r := multiOrder(k)
		if len(k) != h.d || r < 0 || r > 60 {
			return nil, fmt.Errorf("mv: multi-index %v in dimension %d; needs %d entries of at least 0 with a sum of at most 60: %w", k, h.d, h.d, ErrShape)
		}
		b := make([]byte, h.d)
		for j, v := range k {
			b[j] = byte(v)
		}
		t.want = append(t.want, int(need(b)))
		t.sign = append(t.sign, float64(1-2*(r%2)))
	}
	return t, nil
}

// scratch returns room for one evaluation: z, then the factors.
func (t *hermiteTable) scratch() []float64 { return make([]float64, t.d+len(t.steps)) }

// at fills the scratch for x and returns x'Px and the factors; the value for
// asked index j is sign[j]*factors[want[j]]*phi_S(x).
func (t *hermiteTable) at(scratch, x []float64) (float64, []float64) {
	z, f := scratch[:t.d], scratch[t.d:]
	var q float64
	for i := range z {
		var s float64
		for j, v := range x {
			s += t.p[i*t.d+j] * v
		}
		z[i] = s
		q += s * x[i]
	}
	f[0] = 1
	for i := 1; i < len(t.steps); i++ {
		st := &t.steps[i]
		v := z[st.axis] * f[st.base]
		for _, term := range t.terms[st.lo:st.hi] {
			v -= term.c * f[term.at]
		}
		f[i] = v
	}
	return q, f
}
