package mv

import "math"

// treeQuery is the working room of one goroutine.
type treeQuery struct {
	t     *Tree
	atol  float64
	q     []float64 // the whitened query
	s     []float64 // query minus the centre of a cell
	mono  []float64
	stack []int32
}

func (t *Tree) newQuery(atol float64) *treeQuery {
	return &treeQuery{
		t: t, atol: atol, q: make([]float64, t.d), s: make([]float64, t.d),
		mono: make([]float64, t.plan.start[t.plan.order+1]), stack: make([]int32, 0, 128),
	}
}

// look puts q minus the centre of cell i into s and returns |s|^2, the squared
// distances to the nearest and farthest point of the box, and the largest
// |s'y| over the box.
func (q *treeQuery) look(i int) (s2, near2, far2, t float64) {
	d := q.t.d
	box := q.t.box[2*d*i : 2*d*i+2*d]
	if d == 2 {
		l0, l1, h0, h1 := box[0], box[1], box[2], box[3]
		q0, q1 := q.q[0], q.q[1]
		s0, s1 := q0-(l0+h0)/2, q1-(l1+h1)/2
		q.s[0], q.s[1] = s0, s1
		n0, n1 := max(l0-q0, q0-h0, 0), max(l1-q1, q1-h1, 0)
		f0, f1 := max(q0-l0, h0-q0), max(q1-l1, h1-q1)
		return s0*s0 + s1*s1, float64(n0*n0) + float64(n1*n1), float64(f0*f0) + float64(f1*f1), (math.Abs(s0)*(h0-l0) + math.Abs(s1)*(h1-l1)) / 2
	}
	low, high := box[:d], box[d:2*d]
	for k, v := range q.q {
		l, h := low[k], high[k]
		s := v - (l+h)/2
		q.s[k] = s
		s2 += s * s
		n := max(l-v, v-h, 0)
		near2 += float64(n * n)
		f := max(v-l, h-v)
		far2 += float64(f * f)
		t += math.Abs(s) * (h - l)
	}
	return s2, near2, far2, t / 2
}

// push puts the children of a cell on the stack, the nearer on top.
func (q *treeQuery) push(i int, node *treeNode) {
	if q.q[node.axis] < node.cut {
		q.stack = append(q.stack, node.right, int32(i+1))
	} else {
		q.stack = append(q.stack, int32(i+1), node.right)
	}
}

// gaussian returns the sum of w exp((r2-|q-x|^2)/2) over the events, within the
// bound, and r2, the squared distance to some near event.
func (q *treeQuery) gaussian() (sum, r2 float64) {
	t := q.t
	r2, low := q.nearby()
	if math.IsInf(r2, 1) {
		return 0, r2 // the squared distance is beyond float64
	}
	total := t.sumW
	atol := 0.0
	if q.atol > 0 {
		atol = q.atol * total / t.norm * math.Exp(0.5*r2)
	}
	tau := (t.rtol*low + atol) / total
	if t.rtol == 0 && q.atol == 0 {
		tau = 1e-6 * low / total // LogDensity of a tree with an absolute bound
	}
	lnTau := math.Log(tau)
	next := 4 * low
	order := t.plan.order + 1
	cheb := t.plan.cheb
	q.stack = append(q.stack[:0], 0)
	for len(q.stack) > 0 {
		i := int(q.stack[len(q.stack)-1])
		q.stack = q.stack[:len(q.stack)-1]
		node := &t.nodes[i]
		s2, near2, _, reach := q.look(i)
		if 0.5*(r2-near2) <= lnTau {
			continue
		}
		if node.mom >= 0 {
			if key := chebKey(reach); key < chebKeys {
				errs := cheb.lnErr[key*order : key*order+order]
				granted := lnTau - 0.5*(r2-s2) - node.lnM0
				if errs[order-1] <= granted {
					p := 0
					for errs[p] > granted {
						p++
					}
					sum += math.Exp(0.5*(r2-s2)) * q.series(node, p, cheb.coef[(key*order+p)*order:])
					goto done
				}
			}
		}
		if node.right != 0 {
			q.push(i, node)
			continue
		}
		sum += q.leafGaussian(node, r2)
	done:
		if sum > next {
			// All error granted so far is at most total*tau.
			low = max(low, sum*(1-1e-12)-total*tau)
			tau = max(tau, (t.rtol*low+atol)/total)
			lnTau = math.Log(tau)
			next = 2 * sum
		}
	}
	return sum, r2
}

// series returns sum_j a_j m_j, m_j the sum of w exp(-|y|^2/2) (s'y)^j.
func (q *treeQuery) series(node *treeNode, p int, a []float64) float64 {
	plan := q.t.plan
	m := q.t.mom[int(node.mom)*plan.size : (int(node.mom)+1)*plan.size]
	value := a[0] * m[0]
	if p == 0 {
		return value
	}
	plan.fill(q.mono, q.s, 1, p)
	for j := 1; j <= p; j++ {
		lo, hi := plan.start[j], plan.start[j+1]
		x := q.mono[lo:hi]
		var sum float64
		for i, c := range m[lo:hi] {
			sum += c * x[i]
		}
		value += a[j] * sum
	}
	return value
}

func (q *treeQuery) leafGaussian(node *treeNode, r2 float64) float64 {
	t := q.t
	d := t.d
	var sum float64
	lo, hi := int(node.lo), int(node.hi)
	var buf [64]float64
	for ; lo < hi; lo += len(buf) {
		dist := buf[:min(len(buf), hi-lo)]
		distances(dist, t.z[lo*d:], d, q.q)
		for i, v := range dist {
			e := 0.5 * (r2 - v)
			if e < -745 {
				continue
			}
			e = math.Exp(e)
			if t.w != nil {
				e *= t.w[lo+i]
			}
			sum += e
		}
	}
	return sum
}

// nearby returns the squared distance to a near event and its weight: the best
// of the leaf the query falls into or, when that is far, the nearest of all, so
// that the scaled terms cannot overflow.
func (q *treeQuery) nearby() (r2, w float64) {
	t := q.t
	i := 0
	for t.nodes[i].right != 0 {
		if q.q[t.nodes[i].axis] < t.nodes[i].cut {
			i++
		} else {
			i = int(t.nodes[i].right)
		}
	}
	r2, w = math.Inf(1), 0
	r2, w = q.nearest(&t.nodes[i], r2, w)
	if r2 < 200 {
		return r2, w
	}
	q.stack = append(q.stack[:0], 0)
	for len(q.stack) > 0 {
		i := int(q.stack[len(q.stack)-1])
		q.stack = q.stack[:len(q.stack)-1]
		if _, near2, _, _ := q.look(i); near2 >= r2 {
			continue
		}
		if node := &t.nodes[i]; node.right != 0 {
			q.push(i, node)
		} else {
			r2, w = q.nearest(node, r2, w)
		}
	}
	return r2, w
}

func (q *treeQuery) nearest(node *treeNode, r2, w float64) (float64, float64) {
	t := q.t
	d := t.d
	lo, hi := int(node.lo), int(node.hi)
	var buf [64]float64
	for ; lo < hi; lo += len(buf) {
		dist := buf[:min(len(buf), hi-lo)]
		distances(dist, t.z[lo*d:], d, q.q)
		for i, v := range dist {
			if v < r2 {
				r2, w = v, 1
				if t.w != nil {
					w = t.w[lo+i]
				}
			}
		}
	}
	return r2, w
}

// compact returns the sum of w (1-|q-x|^2)^p over the events within the unit
// ball, within the bound.
func (q *treeQuery) compact() float64 {
	t := q.t
	total := t.sumW
	atol := q.atol * total / t.norm
	rtol := t.rtol
	if rtol == 0 && atol == 0 {
		rtol = 1e-6
	}
	var sum, low float64
	tau := atol / total
	q.stack = append(q.stack[:0], 0)
	for len(q.stack) > 0 {
		i := int(q.stack[len(q.stack)-1])
		q.stack = q.stack[:len(q.stack)-1]
		node := &t.nodes[i]
		s2, near2, far2, reach := q.look(i)
		if near2 >= 1 || t.kernel.Profile(near2) <= tau {
			continue
		}
		if node.mom >= 0 && far2 < 1 {
			if v, err := q.polynomial(i, node, s2, reach); err <= tau {
				sum += v
				low = max(low, sum*(1-1e-12)-total*tau)
				tau = max(tau, (rtol*low+atol)/total)
				continue
			}
		}
		if node.right != 0 {
			q.push(i, node)
			continue
		}
		sum += profileSum(t.kernel, t.d, q.q, t.z, t.w, int(node.lo), int(node.hi))
		low = max(low, sum*(1-1e-12)-total*tau)
		tau = max(tau, (rtol*low+atol)/total)
	}
	return sum
}

// polynomial returns sum w (1-|s-y|^2)^p over a cell from its moments,
// (A + 2 s'y - |y|^2)^p with A = 1-|s|^2, and a bound on its rounding error per
// unit of weight.
func (q *treeQuery) polynomial(i int, node *treeNode, s2, reach float64) (value, err float64) {
	plan := q.t.plan
	m := q.t.mom[int(node.mom)*plan.size : (int(node.mom)+1)*plan.size]
	p := plan.order
	if p == 0 {
		return m[0], 0
	}
	d := q.t.d
	box := q.t.box[2*d*i : 2*d*i+2*d]
	var y2 float64
	for k := range d {
		half := (box[d+k] - box[k]) / 2
		y2 += half * half
	}
	a := 1 - s2
	size := math.Abs(a) + 2*reach + y2
	err = 2e-15
	for range p {
		err *= size
	}
	plan.fill(q.mono, q.s, 1, p)
	var powers [4]float64
	powers[0] = 1
	for k := 1; k <= p; k++ {
		powers[k] = powers[k-1] * a
	}
	at := 0
	for b := 0; b <= p; b++ {
		for j := 0; j+b <= p; j++ {
			lo, hi := plan.start[j], plan.start[j+1]
			var dot float64
			for k, c := range m[at+lo : at+hi] {
				dot += c * q.mono[lo+k]
			}
			value += plan.coef[j*(p+1)+b] * powers[p-j-b] * dot
		}
		at += plan.start[p-b+1]
	}
	return value, err
}
