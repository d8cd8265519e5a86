package bandwidth

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"drumlin/mv"
)

// pilotFor returns the unconstrained pilot for the functional of order r: the
// G that minimises the squared norm of the leading bias vector
//
//	n^-1 D^k phi_G(0) + 1/2 sum_ij G_ij psi_(k+ei+ej),   |k| = r,
//
// every distinct k counted with its multiplicity, which keeps the norm, and so
// G, equivariant under rotations. psi holds the functionals of order r+2.
// Levenberg-Marquardt with analytic derivatives (heat equation: the derivative
// of phi_G by G_ij is half D^(ei+ej) phi_G), from several starts. Source:
// Chacon and Duong 2010.
func pilotFor(r int, n float64, psi []float64, start mv.BandwidthMatrix) (mv.BandwidthMatrix, error) {
	d := start.Dim()
	c := coords{d, Full}
	p := newBiasVector(r, d, n, psi)
	best, bestNorm := mv.BandwidthMatrix{}, math.Inf(1)
	from := starts(start, c)
	slices.SortStableFunc(from, func(x, y []float64) int { return cmp.Compare(p.norm(c, x), p.norm(c, y)) })
	for _, x := range from[:min(3, len(from))] {
		norm := p.descend(c, x)
		h, err := mv.NewBandwidthMatrix(d, c.matrix(x))
		if err == nil && norm < bestNorm*(1-1e-9) {
			best, bestNorm = h, norm
		}
	}
	if best.Dim() == 0 {
		return start, ErrNoMinimum
	}
	return best, nil
}

type biasVector struct {
	r, d  int
	n     float64
	index [][]int
	root  []float64 // square roots of the multiplicities
	psi   []float64
	up2   [][]int // up2[k][i*d+j]: position of k+ei+ej among the indices of order r+2
}

func newBiasVector(r, d int, n float64, psi []float64) *biasVector {
	p := &biasVector{r: r, d: d, n: n, psi: psi, index: mv.MultiIndices(d, r)}
	pos := positions(d, r+2)
	for _, k := range p.index {
		p.root = append(p.root, math.Sqrt(mv.Multiplicity(k)))
		row := make([]int, d*d)
		for i := range d {
			for j := range d {
				up := append([]int(nil), k...)
				up[i]++
				up[j]++
				row[i*d+j] = pos[key(up)]
			}
		}
		p.up2 = append(p.up2, row)
	}
	return p
}

func key(k []int) string {
	b := make([]byte, len(k))
	for i, v := range k {
		b[i] = byte(v)
	}
	return string(b)
}

// at returns the residuals and, row by row, their derivatives by the entries of
// G taken as independent.
func (p *biasVector) at(g mv.BandwidthMatrix) (res []float64, jac [][]float64) {
	low, high := mv.NormalDerivativesAtZero(g, p.r), mv.NormalDerivativesAtZero(g, p.r+2)
	for q := range p.index {
		v := low[q] / p.n
		row := make([]float64, p.d*p.d)
		for ij, up := range p.up2[q] {
			v += 0.5 * g.At(ij/p.d, ij%p.d) * p.psi[up]
			row[ij] = p.root[q] * (0.5*high[up]/p.n + 0.5*p.psi[up])
		}
		res = append(res, p.root[q]*v)
		jac = append(jac, row)
	}
	return res, jac
}

// norm returns the squared norm of the bias vector.
func (p *biasVector) norm(c coords, x []float64) float64 {
	h, err := mv.NewBandwidthMatrix(p.d, c.matrix(x))
	if err != nil {
		return math.Inf(1)
	}
	low := mv.NormalDerivativesAtZero(h, p.r)
	var sum float64
	for q := range p.index {
		v := low[q] / p.n
		for ij, up := range p.up2[q] {
			v += 0.5 * h.At(ij/p.d, ij%p.d) * p.psi[up]
		}
		sum += p.root[q] * p.root[q] * v * v
	}
	return sum
}

// descend runs Levenberg-Marquardt in place and returns the squared norm at
// the end.
func (p *biasVector) descend(c coords, x []float64) float64 {
	m := c.len()
	lambda := 1e-3
	now := p.norm(c, x)
	for range 200 {
		h, err := mv.NewBandwidthMatrix(p.d, c.matrix(x))
		if err != nil {
			return math.Inf(1)
		}
		res, jacH := p.at(h)
		jtj := mat.NewSymDense(m, nil)
		jtr := mat.NewVecDense(m, nil)
		for q := range res {
			row := c.pull(x, jacH[q])
			for a := range m {
				jtr.SetVec(a, jtr.AtVec(a)+row[a]*res[q])
				for b := a; b < m; b++ {
					jtj.SetSym(a, b, jtj.At(a, b)+row[a]*row[b])
				}
			}
		}
		improved, moved, before := false, 0.0, now
		for ; lambda < 1e12; lambda *= 8 {
			damped := mat.NewSymDense(m, nil)
			damped.CopySym(jtj)
			for a := range m {
				damped.SetSym(a, a, jtj.At(a, a)*(1+lambda)+1e-300)
			}
			var chol mat.Cholesky
			var step mat.VecDense
			if !chol.Factorize(damped) || chol.SolveVecTo(&step, jtr) != nil {
				continue
			}
			trial := make([]float64, m)
			moved = 0
			for a := range m {
				s := math.Max(-1, math.Min(1, step.AtVec(a)))
				trial[a] = x[a] - s
				moved = math.Max(moved, math.Abs(s))
			}
			if v := p.norm(c, trial); v < now {
				copy(x, trial)
				now, improved = v, true
				lambda = math.Max(lambda/10, 1e-15)
				break
			}
		}
		if !improved || moved < 1e-10 || before-now < 1e-15*now {
			break
		}
	}
	return now
}

// scalarPilot returns the multiple g^2 I that minimises the squared norm of the
// same bias vector,
//
//	g^(d+r+2) = 4(r+d) A1 / (n [-(d+r-2) A2 + sqrt((d+r-2)^2 A2^2 + 8(d+r) A1 A3)]),
//
// A1 = sum K_k^2, A2 = sum K_k P_k, A3 = sum P_k^2 over |k| = r, every k with
// its multiplicity, K_k = D^k phi_I(0), P_k = sum_i psi_(k+2ei). Source: Duong
// and Hazelton 2003, in this form with multiplicities.
func scalarPilot(r, d int, n float64, psi []float64) (mv.BandwidthMatrix, error) {
	id, err := mv.ScalarBandwidth(d, 1)
	if err != nil {
		return id, err
	}
	kernel, pos := mv.NormalDerivativesAtZero(id, r), positions(d, r+2)
	var a1, a2, a3 float64
	for q, k := range mv.MultiIndices(d, r) {
		var p float64
		for i := range d {
			up := append([]int(nil), k...)
			up[i] += 2
			p += psi[pos[key(up)]]
		}
		m := mv.Multiplicity(k)
		a1 += m * kernel[q] * kernel[q]
		a2 += m * kernel[q] * p
		a3 += m * p * p
	}
	w := float64(d+r-2) * a2
	g := math.Pow(float64(4*(r+d))*a1/(n*(-w+math.Sqrt(w*w+8*float64(d+r)*a1*a3))), 1/float64(d+r+2))
	return mv.ScalarBandwidth(d, g)
}
