package spatial

import "math"

// locator answers whether a position lies in a study area: cells that the
// border does not meet are known, the others ask the sides in their row.
type locator struct {
	lo     XY
	step   XY
	n      int
	state  []uint8 // 0 outside, 1 inside, 2 the border passes
	rows   [][]locatorSide
	lo2, h XY
}

type locatorSide struct{ a, b XY }

func newLocator(w *StudyArea) *locator {
	n := 64
	for n < 1024 && n*n < 64*w.Vertices() {
		n *= 2
	}
	l := &locator{lo: w.lo, n: n, state: make([]uint8, n*n), rows: make([][]locatorSide, n), lo2: w.lo, h: w.hi}
	l.step = XY{(w.hi.X - w.lo.X) / float64(n), (w.hi.Y - w.lo.Y) / float64(n)}
	at := func(v, lo, step float64) int { return max(0, min(n-1, int((v-lo)/step))) }
	for _, r := range w.rings {
		for i, a := range r {
			b := r[(i+1)%len(r)]
			y0, y1 := min(a.Y, b.Y), max(a.Y, b.Y)
			const hair = 1e-9
			for j := at(y0-hair*l.step.Y, w.lo.Y, l.step.Y); j <= at(y1+hair*l.step.Y, w.lo.Y, l.step.Y); j++ {
				l.rows[j] = append(l.rows[j], locatorSide{a, b})
				// the part of the side in this row
				lo, hi := w.lo.Y+float64(j)*l.step.Y, w.lo.Y+float64(j+1)*l.step.Y
				x0, x1 := a.X, b.X
				if d := b.Y - a.Y; d != 0 {
					clip := func(y float64) float64 { return a.X + (b.X-a.X)*max(0, min(1, (y-a.Y)/d)) }
					x0, x1 = clip(lo), clip(hi)
				}
				if x0 > x1 {
					x0, x1 = x1, x0
				}
				pad := 1e-6 * l.step.X
				for i := at(x0-pad, w.lo.X, l.step.X); i <= at(x1+pad, w.lo.X, l.step.X); i++ {
					l.state[j*n+i] = 2
				}
			}
		}
	}
	for j := range n {
		known := -1
		for i := range n {
			switch {
			case l.state[j*n+i] == 2:
				known = -1
			case known >= 0:
				l.state[j*n+i] = uint8(known)
			default:
				known = 0
				if l.ask(j, XY{w.lo.X + (float64(i)+.5)*l.step.X, w.lo.Y + (float64(j)+.5)*l.step.Y}) {
					known = 1
				}
				l.state[j*n+i] = uint8(known)
			}
		}
	}
	return l
}

// ask counts the sides of a row that a ray to the east meets.
func (l *locator) ask(j int, p XY) bool {
	in := false
	for _, s := range l.rows[j] {
		a, b := s.a, s.b
		if (a.Y > p.Y) != (b.Y > p.Y) {
			if a.Y > b.Y {
				a, b = b, a
			}
			if p.X < a.X+(p.Y-a.Y)/(b.Y-a.Y)*(b.X-a.X) {
				in = !in
			}
		}
	}
	return in
}

func (l *locator) contains(p XY) bool {
	if !(p.X >= l.lo.X && p.Y >= l.lo.Y && p.X <= l.h.X && p.Y <= l.h.Y) {
		return false
	}
	i, j := min(int((p.X-l.lo.X)/l.step.X), l.n-1), min(int((p.Y-l.lo.Y)/l.step.Y), l.n-1)
	if s := l.state[j*l.n+i]; s != 2 {
		return s == 1
	}
	return l.ask(j, p)
}

// eachCell cuts the segment from a to b, in units of cells, where it passes
// from cell to cell, and calls f for every piece in the rows [0, rows). Pieces
// left and right of the columns keep their own column.
func eachCell(a, b XY, rows int, f func(i, j int, a, b XY)) {
	t0, t1 := 0.0, 1.0
	if d := b.Y - a.Y; d != 0 {
		u, v := (0-a.Y)/d, (float64(rows)-a.Y)/d
		t0, t1 = max(t0, min(u, v)), min(t1, max(u, v))
		if !(t0 < t1) {
			return
		}
	} else if a.Y < 0 || a.Y > float64(rows) {
		return
	}
	at := func(t float64) XY { return XY{a.X + t*(b.X-a.X), a.Y + t*(b.Y-a.Y)} }
	from, t := at(t0), t0
	if t0 == 0 {
		from = a
	}
	mid := at(t0 + (t1-t0)*1e-12)
	i, j := int(math.Floor(mid.X)), int(math.Floor(mid.Y))
	dx, dy := b.X-a.X, b.Y-a.Y
	for guard := 0; t < t1 && guard < 1<<24; guard++ {
		nx, ny := math.Inf(1), math.Inf(1)
		if dx > 0 {
			nx = (float64(i+1) - a.X) / dx
		} else if dx < 0 {
			nx = (float64(i) - a.X) / dx
		}
		if dy > 0 {
			ny = (float64(j+1) - a.Y) / dy
		} else if dy < 0 {
			ny = (float64(j) - a.Y) / dy
		}
		next := max(t, min(nx, ny, t1))
		to := at(next)
		if next == 1 {
			to = b
		}
		if j >= 0 && j < rows {
			f(i, j, from, to)
		}
		if next >= t1 {
			return
		}
		if nx <= ny {
			if dx > 0 {
				i++
			} else {
				i--
			}
		}
		if ny <= nx {
			if dy > 0 {
				j++
			} else {
				j--
			}
		}
		from, t = to, next
	}
}
