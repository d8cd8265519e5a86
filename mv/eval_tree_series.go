package mv

import (
	"math"
	"sync"
)

// seriesPlan lays out the moments of a cell for one kernel and dimension.
//
// Monomials of degree j in d variables stand in a block made of x_0 times those
// of degree j-1 in x_0 alone, x_1 times those in x_0 and x_1, and so on: the
// monomials of degree j-1 in the first variables are a prefix of their block,
// so a block is filled by d scaled copies without an index.
type seriesPlan struct {
	kernel Kernel
	d      int
	order  int   // highest degree
	start  []int // start[j]: first monomial of degree j; one more at the end
	prefix []int // prefix[j*d+v]: monomials of degree j-1 in variables 0..v
	multi  []float64
	size   int // floats per cell
	few    int // cells with fewer events carry no moments
	leaf   int
	cheb   *chebTable // Gaussian
	coef   []float64  // compact: p!/(a! b! (p-a-b)!) 2^a (-1)^b at a*(p+1)+b
}

// gaussianOrders is the highest order by dimension, a balance of the cost of a
// cell (binomial of order+d over d terms) against the number of cells.
var gaussianOrders = [...]int{0, 16, 10, 8, 6, 5, 4}

func newSeriesPlan(k Kernel, d int) *seriesPlan {
	p := &seriesPlan{kernel: k, d: d}
	if k == Gaussian {
		p.order = 3
		if d < len(gaussianOrders) {
			p.order = gaussianOrders[d]
		} else if d > 9 {
			p.order = 2
		}
	} else {
		p.order = k.power()
	}
	p.prefix = make([]int, (p.order+1)*d)
	p.start = []int{0, 1}
	// size of the block of degree j in variables 0..v
	prev := make([]int, d)
	for v := range prev {
		prev[v] = 1
	}
	for j := 1; j <= p.order; j++ {
		cur, total := make([]int, d), 0
		for v := range d {
			p.prefix[j*d+v] = prev[v]
			total += prev[v]
			cur[v] = total
		}
		p.start = append(p.start, p.start[j]+total)
		prev = cur
	}
	terms := p.start[p.order+1]
	p.multi = make([]float64, terms)
	p.multi[0] = 1
	exps := make([][]int, terms)
	exps[0] = make([]int, d)
	for j := 1; j <= p.order; j++ {
		at := p.start[j]
		for v := range d {
			for i := range p.prefix[j*d+v] {
				e := append([]int(nil), exps[p.start[j-1]+i]...)
				e[v]++
				exps[at] = e
				p.multi[at] = Multiplicity(e)
				at++
			}
		}
	}
	if k == Gaussian {
		p.size = terms
		p.cheb = chebyshevTable(p.order)
		p.few = max(8, terms/3)
	} else {
		for b := 0; b <= p.order; b++ {
			p.size += p.start[p.order-b+1]
		}
		p.few = max(4, p.size/3)
		n := p.order
		p.coef = make([]float64, (n+1)*(n+1))
		for a := 0; a <= n; a++ {
			for b := 0; a+b <= n; b++ {
				c := factorial(n) / (factorial(a) * factorial(b) * factorial(n-a-b)) * math.Ldexp(1, a)
				if b%2 == 1 {
					c = -c
				}
				p.coef[a*(n+1)+b] = c
			}
		}
	}
	p.leaf = min(max(8, p.few), 64)
	return p
}

// fill writes the monomials of x up to degree order, each times first.
func (p *seriesPlan) fill(out, x []float64, first float64, order int) {
	out[0] = first
	d := p.d
	for j := 1; j <= order; j++ {
		prev := out[p.start[j-1]:p.start[j]]
		next := out[p.start[j]:p.start[j+1]]
		for v, n := range p.prefix[j*d : j*d+d] {
			xv := x[v]
			src := prev[:n]
			dst := next[:n]
			for i, m := range src {
				dst[i] = m * xv
			}
			next = next[n:]
		}
	}
}

// fillLanes is fill to the full order for several events at once.
func (p *seriesPlan) fillLanes(out, x [][lanes]float64, first [lanes]float64) {
	out[0] = first
	d := p.d
	for j := 1; j <= p.order; j++ {
		prev := out[p.start[j-1]:p.start[j]]
		next := out[p.start[j]:p.start[j+1]]
		for v, n := range p.prefix[j*d : j*d+d] {
			x0, x1, x2, x3 := x[v][0], x[v][1], x[v][2], x[v][3]
			src := prev[:n]
			dst := next[:n]
			for i := range src {
				a, b := &src[i], &dst[i]
				b[0], b[1], b[2], b[3] = a[0]*x0, a[1]*x1, a[2]*x2, a[3]*x3
			}
			next = next[n:]
		}
	}
}

// chebTable holds, for a scale of T and every order p, the coefficients of the
// Chebyshev series of exp on [-T, T] cut after order p, as powers of z, and the
// logarithm of its error bound with the allowance for rounding.
type chebTable struct {
	order int
	lnErr []float64 // [key*(order+1)+p]
	coef  []float64 // [(key*(order+1)+p)*(order+1)+j]
}

// The scale of T has eight steps per octave, from 2^-12 to 16; a T is served
// by the upper end of its step.
const (
	chebLow   = 1023 - 12
	chebKeys  = 16 * 8
	chebShift = 49
	chebBase  = chebLow << (52 - chebShift)
)

// chebKey returns the step of T, or chebKeys when T is beyond the table.
func chebKey(t float64) int {
	k := int(math.Float64bits(t)>>chebShift) - chebBase
	return min(max(k, 0), chebKeys)
}

var (
	chebMu     sync.Mutex
	chebTables = map[int]*chebTable{}
)

func chebyshevTable(order int) *chebTable {
	chebMu.Lock()
	defer chebMu.Unlock()
	if t, ok := chebTables[order]; ok {
		return t
	}
	const extra = 48 // I_k beyond order+extra is below 1e-20 of the rest for T <= 16
	n := order + 1
	t := &chebTable{order: order, lnErr: make([]float64, chebKeys*n), coef: make([]float64, chebKeys*n*n)}
	poly := chebyshevPolynomials(order)
	for key := range chebKeys {
		top := math.Float64frombits(uint64(chebBase+key+1) << chebShift)
		bessel := make([]float64, order+extra+1)
		for k := range bessel {
			bessel[k] = besselI(k, top)
		}
		for p := 0; p <= order; p++ {
			a := t.coef[(key*n+p)*n : (key*n+p)*n+n]
			for k := 0; k <= p; k++ {
				c := 2 * bessel[k]
				if k == 0 {
					c = bessel[0]
				}
				for j := 0; j <= k; j++ {
					a[j] += c * poly[k*n+j]
				}
			}
			var tail, size float64
			for k := len(bessel) - 1; k > p; k-- {
				tail += 2 * bessel[k]
			}
			scale := 1.0
			for j := range a {
				size += math.Abs(a[j])
				a[j] /= scale
				scale *= top
			}
			t.lnErr[key*n+p] = math.Log(tail*(1+1e-12) + 2e-15*size)
		}
	}
	chebTables[order] = t
	return t
}

// chebyshevPolynomials returns the coefficients of T_0..T_order in powers of x.
func chebyshevPolynomials(order int) []float64 {
	n := order + 1
	c := make([]float64, n*n)
	c[0] = 1
	if order > 0 {
		c[n+1] = 1
	}
	for k := 2; k <= order; k++ {
		for j := 0; j <= k; j++ {
			if j > 0 {
				c[k*n+j] = 2 * c[(k-1)*n+j-1]
			}
			c[k*n+j] -= c[(k-2)*n+j]
		}
	}
	return c
}

// besselI returns the modified Bessel function I_k(t), all terms positive.
func besselI(k int, t float64) float64 {
	term := 1.0
	for i := 1; i <= k; i++ {
		term *= t / (2 * float64(i))
	}
	sum := term
	for m := 1; m < 400; m++ {
		term *= t * t / (4 * float64(m) * float64(m+k))
		sum += term
		if term < 1e-18*sum {
			break
		}
	}
	return sum
}
