package mv

import (
	"context"
	"math"

	"drumlin/mv/internal/fft"
)

// splineAt is the working room for one point: the nodes it touches.
type splineAt struct {
	p     *latticePlan
	inv   []float64 // 1/(n-1) for the recurrence
	b     [][]float64
	row   []int     // offsets of the rows along axis 0
	value []float64 // products of the other axes' weights
}

func newSplineAt(p *latticePlan) *splineAt {
	d := len(p.nodes)
	a := &splineAt{p: p, inv: make([]float64, p.order+1), b: make([][]float64, d)}
	for n := 2; n <= p.order; n++ {
		a.inv[n] = 1 / float64(n-1)
	}
	rows := 1
	for k := range d {
		a.b[k] = make([]float64, p.order)
		if k > 0 {
			rows *= p.order
		}
	}
	a.row, a.value = make([]int, 0, rows), make([]float64, 0, rows)
	return a
}

// at fills the weights for point i of cols, times w, and reports whether all
// nodes it touches are within the period.
func (a *splineAt) at(cols [][]float64, i int, w float64) bool {
	p := a.p
	d := len(p.nodes)
	a.row, a.value = append(a.row[:0], 0), append(a.value[:0], w)
	for k := d - 1; k >= 0; k-- {
		u := (cols[k][i] - p.origin[k]) / p.step[k]
		base := math.Floor(u)
		if !(base >= float64(p.order/2-1)) || !(base < float64(p.nodes[k]-p.order/2)) {
			return false
		}
		b := a.b[k]
		a.spline(b, u-base)
		first := int(base) - p.order/2 + 1
		if k == 0 {
			for r := range a.row {
				a.row[r] = a.row[r]*p.nodes[0] + first
			}
			return true
		}
		// Expand the rows by this axis, the slower axes varying slowest.
		n := len(a.row)
		a.row, a.value = a.row[:n*p.order], a.value[:n*p.order]
		for r := n - 1; r >= 0; r-- {
			off, v := a.row[r]*p.nodes[k]+first, a.value[r]
			for j := p.order - 1; j >= 0; j-- {
				a.row[r*p.order+j], a.value[r*p.order+j] = off+j, v*b[j]
			}
		}
	}
	return true
}

// spline writes the weights of the w nodes around a point at fraction f of its
// cell, the leftmost node first: the B-spline M_w at f+w-1, ..., f+1, f, by the
// recurrence M_n(x) = (x M_{n-1}(x) + (n-x) M_{n-1}(x-1))/(n-1).
func (a *splineAt) spline(b []float64, f float64) {
	// b is filled backwards, b[w-1-j] = M(f+j), so that it ends in node order.
	top := len(b) - 1
	b[top] = 1
	for n := 2; n <= len(b); n++ {
		c := a.inv[n]
		last := f + float64(n-1)
		b[top-n+1] = (float64(n) - last) * c * b[top-n+2]
		for j := n - 2; j >= 1; j-- {
			x := f + float64(j)
			b[top-j] = c * (x*b[top-j] + (float64(n)-x)*b[top-j+1])
		}
		b[top] *= c * f
	}
}

// spread returns the nodes' weights, sum 1. Events are first sorted by slabs of
// the slowest axis; slabs that cannot touch the same node are added at the same
// time, so the sums do not depend on the number of workers.
func (e *LatticeEvaluator) spread() []float64 {
	p, s := &e.plan, e.s
	d := s.d
	grid := make([]float64, int(p.cells()))
	const slab = 16 // rows, at least the order
	slow := d - 1
	slabs := p.nodes[slow]/slab + 1
	count := make([]int, slabs+1)
	which := make([]int32, s.n)
	for i, v := range s.cols[slow] {
		c := int((v-p.origin[slow])/p.step[slow]) / slab
		which[i] = int32(c)
		count[c+1]++
	}
	for c := range slabs {
		count[c+1] += count[c]
	}
	sorted, next := make([]int32, s.n), append([]int(nil), count...)
	for i, c := range which {
		sorted[next[c]] = int32(i)
		next[c]++
	}
	width := p.order
	workers := workerCount(e.opt.Workers)
	for phase := range 2 {
		fft.Parallel((slabs+1-phase)/2, workers, func() *splineAt { return newSplineAt(p) }, func(j int, a *splineAt) {
			c := 2*j + phase
			for _, i := range sorted[count[c]:count[c+1]] {
				if !a.at(s.cols, int(i), s.Weight(int(i))/s.sumW) {
					panic("mv: an event outside its own lattice")
				}
				b := a.b[0]
				for r, off := range a.row {
					dst, v := grid[off:off+width], a.value[r]
					for k, w := range b[:len(dst)] {
						dst[k] += v * w
					}
				}
			}
		})
	}
	return grid
}

// transform fills phi, divided twice by the spline's transform.
func (e *LatticeEvaluator) transform() {
	p := &e.plan
	d := e.s.d
	workers := workerCount(e.opt.Workers)
	e.phi = fft.Forward(e.spread(), p.nodes, p.nodes, p.keep, workers)
	e.freq, e.alias = make([][]float64, d), make([][]float64, d)
	hat := make([][]float64, d)
	for k := range d {
		m := p.keep[k]
		if k == 0 {
			m = e.phi.Width()
		}
		e.freq[k], e.alias[k], hat[k] = make([]float64, m), make([]float64, m), make([]float64, m)
		for i := range m {
			u := float64(fft.Frequency(i, p.keep[k])) / float64(p.nodes[k])
			e.freq[k][i] = 2 * math.Pi * u / p.step[k]
			e.alias[k][i] = aliasShare(u, p.order)
			hat[k][i] = 1
			if u != 0 {
				hat[k][i] = powInt(math.Pi*u/math.Sin(math.Pi*u), 2*p.order)
			}
		}
	}
	width := e.phi.Width()
	e.rows(func(row int, rest []int) {
		c := 1.0
		for k, i := range rest {
			c *= hat[k+1][i]
		}
		line := e.phi.Data[row*width : (row+1)*width]
		for i, v := range line {
			line[i] = v * complex(c*hat[0][i], 0)
		}
	})
}

// rows calls f for every line of kept frequencies along axis 0.
func (e *LatticeEvaluator) rows(f func(row int, rest []int)) {
	keep := e.plan.keep
	fft.Parallel(e.phi.Rows(), workerCount(e.opt.Workers), func() []int { return make([]int, len(keep)-1) }, func(row int, rest []int) {
		r := row
		for k := range rest {
			rest[k] = r % keep[k+1]
			r /= keep[k+1]
		}
		f(row, rest)
	})
}

// field returns the spline coefficients of the density (k nil) or of D^k, the
// aliasing part of the density's bound and the sum of the kernel's transform
// over the frequencies kept, both over V.
func (e *LatticeEvaluator) field(k []int) (coef []float64, aliased, kept float64) {
	p := &e.plan
	d := e.s.d
	width, full := e.phi.Width(), p.nodes[0]/2+1
	size := full
	perNode := 1.0
	for a := range d {
		if a > 0 {
			size *= p.nodes[a]
		}
		perNode /= float64(p.nodes[a]) * p.step[a]
	}
	work := fft.Half{Keep: p.nodes, Data: make([]complex128, size)}
	phase := complex128(1)
	if k != nil {
		phase = [4]complex128{1, complex(0, 1), -1, complex(0, -1)}[multiOrder(k)%4]
	}
	limit := p.radius * p.radius
	sums := make([][2]float64, e.phi.Rows())
	h := e.h.h
	e.rows(func(row int, rest []int) {
		var b, c float64
		at, stride, line, shares := 0, full, 1.0, 1.0
		for i, bin := range rest {
			ti := e.freq[i+1][bin]
			b += h[i+1] * ti
			for j, bj := range rest {
				c += h[(i+1)*d+j+1] * ti * e.freq[j+1][bj]
			}
			if 2*bin == p.keep[i+1] {
				return // the border frequency, beyond the radius
			}
			f := fft.Frequency(bin, p.keep[i+1])
			if f < 0 {
				f += p.nodes[i+1]
			}
			at += f * stride
			stride *= p.nodes[i+1]
			if k != nil {
				line *= powInt(ti, k[i+1])
			}
			shares *= 1 + e.alias[i+1][bin]
		}
		for i := range width {
			t := e.freq[0][i]
			q := (h[0]*t+2*b)*t + c
			if q > limit || 2*i == p.keep[0] {
				continue
			}
			v := perNode * e.kernel.Transform(d, q)
			pairs := 2.0
			if i == 0 {
				pairs = 1
			}
			share := shares * (1 + e.alias[0][i])
			sums[row][0] += pairs * math.Abs(v) * (share*share - 1)
			sums[row][1] += pairs * math.Abs(v)
			if k != nil {
				v *= line * powInt(t, k[0])
			}
			work.Data[at+i] = e.phi.Data[row*width+i] * complex(v, 0) * phase
		}
	})
	for _, v := range sums {
		aliased += v[0]
		kept += v[1]
	}
	return fft.Inverse(work, p.nodes, workerCount(e.opt.Workers)), aliased, kept
}

// read writes the spline with the given coefficients at the queries; where the
// kernel reaches no event it writes 0.
func (e *LatticeEvaluator) read(ctx context.Context, dst []float64, queries [][]float64, coef []float64) error {
	m, err := checkQueries(e.s.d, queries)
	if err == nil {
		err = checkDst(dst, m)
	}
	if err != nil {
		return err
	}
	p := &e.plan
	return overChunks(ctx, e.opt.Workers, m, 256, func(_, lo, hi int) {
		a := newSplineAt(p)
	next:
		for i := lo; i < hi; i++ {
			dst[i] = 0
			for k, c := range queries {
				if !(c[i] >= p.lo[k] && c[i] <= p.hi[k]) {
					continue next
				}
			}
			if !a.at(queries, i, 1) {
				continue
			}
			var sum float64
			b := a.b[0]
			for r, off := range a.row {
				var line float64
				for k, v := range coef[off : off+len(b)] {
					line += v * b[k]
				}
				sum += a.value[r] * line
			}
			dst[i] = sum
		}
	})
}
