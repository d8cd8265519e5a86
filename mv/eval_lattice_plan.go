package mv

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"

	"drumlin/mv/internal/fft"
)

// latticePlan is the geometry of a LatticeEvaluator.
type latticePlan struct {
	order    int       // w of the B-spline, even
	over     float64   // oversampling s
	radius   float64   // frequencies with t'Ht <= radius^2 are kept
	origin   []float64 // coordinate of node 0
	step     []float64
	nodes    []int // per axis, the whole period
	keep     []int // frequencies per axis
	lo, hi   []float64
	copies   float64 // periodic copies, share of K_H(0)
	rounding float64 // share of K_H(0)
}

// bytesPerNode is what one node costs at the peak: counts, half transforms
// before and after one axis, coefficients.
const bytesPerNode = 40

// cells returns the product of the nodes.
func (p latticePlan) cells() float64 {
	n := 1.0
	for _, v := range p.nodes {
		n *= float64(v)
	}
	return n
}

// work estimates the nanoseconds of one core to prepare and, each, for a query.
func (p latticePlan) work(n int) (build, each float64) {
	d := float64(len(p.nodes))
	touch := math.Pow(float64(p.order), d)
	each = 60 + 1.5*d*float64(p.order*p.order) + 1.4*touch
	return float64(n)*each + p.cells()*(60+25*d), each
}

// planLattice chooses order, oversampling and steps for the least cost among
// those whose bound should meet the target, a share of K_H(0) well below Rtol
// so that most queries can be certified; when memory does not allow, the
// target is loosened tenfold at a time down to what Rtol itself needs.
func planLattice(s *Sample, k Kernel, h BandwidthMatrix, opt LatticeOptions) (latticePlan, error) {
	memory := opt.Memory
	if memory == 0 {
		memory = 1 << 30
	}
	most := float64(memory) / bytesPerNode
	if k != Gaussian {
		return planCompact(s, k, h, opt, most)
	}
	peak := k.Norm(s.d) / h.SqrtDet()
	target := opt.Rtol * 1e-5
	if s.d > 2 {
		target = opt.Rtol * 1e-3
	}
	target = max(target, opt.Atol/peak/2, 4e-13)
	loosest := max(target, min(opt.Rtol, 1e-2))
	if opt.Alone {
		loosest = max(loosest, 1e-3)
	}
	var smallest latticePlan
	for ; ; target *= 10 {
		best, bestCost := latticePlan{}, math.Inf(1)
		for _, over := range []float64{2, 1.6, 1.3} {
			p, ok := planGaussian(s, h, min(target, loosest), over)
			if !ok {
				continue
			}
			if smallest.order == 0 || p.cells() < smallest.cells() {
				smallest = p
			}
			build, _ := p.work(s.n)
			if p.cells() <= most && build < bestCost {
				best, bestCost = p, build
			}
		}
		if best.order > 0 {
			return best, nil
		}
		if target >= loosest {
			break
		}
	}
	return latticePlan{}, fmt.Errorf("mv: lattice evaluator: %s needs %v nodes, about %.3g bytes, and %d are allowed: %w",
		h, smallest.nodes, smallest.cells()*bytesPerNode, memory, ErrTooLarge)
}

// planGaussian returns the smallest spline order that meets the target.
func planGaussian(s *Sample, h BandwidthMatrix, target, over float64) (latticePlan, bool) {
	d := float64(s.d)
	radius := 1.0 // the Gaussian's mass beyond it is a quarter of the target
	for mathext.GammaIncRegComp(d/2, radius*radius/2) > target/4 {
		radius += 0.02
	}
	reach := math.Sqrt(2 * math.Log(8*d/target))
	for order := 4; order <= 14; order += 2 {
		// The mean of a over the kernel's own normal spectrum, twice per axis.
		var mean float64
		const parts = 200
		for i := range parts {
			z := radius * (float64(i) + 0.5) / parts
			mean += 2 * radius / parts * math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) * aliasShare(z/(2*over*radius), order)
		}
		if 2*d*mean > target/2 {
			continue
		}
		p := latticePlan{order: order, over: over, radius: radius, rounding: 3e-14}
		p.copies = 2 * d * 1.01 * math.Exp(-reach*reach/2)
		return p, p.shape(s, h, reach, 0)
	}
	return latticePlan{}, false
}

// planCompact gives a compact kernel the coarsest lattice whose cut-off part
// meets the target, or, for a lattice alone, the finest of at most 2^20 nodes. No
// order means that there is none and the tree must answer.
func planCompact(s *Sample, k Kernel, h BandwidthMatrix, opt LatticeOptions, most float64) (latticePlan, error) {
	least := max(1.1*math.Pi, float64(s.d+2*k.power()))
	p := latticePlan{order: 8, over: 2, rounding: 3e-14}
	if !opt.Alone {
		peak := k.Norm(s.d) / h.SqrtDet()
		target := max(opt.Rtol*1e-2, opt.Atol/peak/2)
		for radius := least; radius <= 512*math.Pi; radius *= 1.2 {
			if p.radius = radius; compactCutOff(k, h, radius) <= target*peak {
				if p.shape(s, h, 1.001, min(most, 1<<22)) {
					return p, nil
				}
				break
			}
		}
		return latticePlan{}, nil
	}
	most = min(most, 1<<20)
	for radius := 512 * math.Pi; radius >= least; radius *= 0.9 {
		if p.radius = radius; p.shape(s, h, 1.001, most) {
			return p, nil
		}
	}
	return latticePlan{}, fmt.Errorf("mv: lattice evaluator: %.0f nodes cannot show the %s kernel with %s: %w", most, k, h, ErrTooLarge)
}

// shape fills the geometry: a period of the extent and two reaches, in scales.
// It reports whether every axis is addressable and the nodes at most most
// (0: any number).
func (p *latticePlan) shape(s *Sample, h BandwidthMatrix, reach, most float64) bool {
	d := s.d
	p.origin, p.step, p.lo, p.hi = make([]float64, d), make([]float64, d), make([]float64, d), make([]float64, d)
	p.nodes, p.keep = make([]int, d), make([]int, d)
	total := 1.0
	for k := range d {
		lo, hi := s.cols[k][0], s.cols[k][0]
		for _, v := range s.cols[k] {
			lo, hi = min(lo, v), max(hi, v)
		}
		edge := p.radius * math.Sqrt(h.InvAt(k, k)) // greatest frequency kept
		step := math.Pi / (p.over * edge)
		r := reach * math.Sqrt(h.At(k, k))
		want := (hi-lo+2*r)/step + float64(p.order) + 3
		if !(want < 1<<30) {
			return false
		}
		p.nodes[k] = fft.GoodSize(int(math.Ceil(want)))
		total *= float64(p.nodes[k])
		p.step[k] = step
		period := step * float64(p.nodes[k])
		p.keep[k] = min(p.nodes[k], 2*(int(edge*period/(2*math.Pi))+1))
		p.origin[k] = lo - r - float64(p.order/2+1)*step
		p.lo[k], p.hi[k] = lo-r, hi+r
	}
	return most == 0 || total <= most
}

// aliasShare returns a(u) = sum_{j != 0} |u/(u+j)|^w for |u| < 1/2, summed to
// j = 8 and bounded beyond.
func aliasShare(u float64, w int) float64 {
	u = math.Abs(u)
	if u == 0 {
		return 0
	}
	var sum float64
	for j := 1.0; j <= 8; j++ {
		sum += powInt(u/(j+u), w) + powInt(u/(j-u), w)
	}
	return sum + 2*powInt(u/(8-u), w)*8/float64(w-1)
}

func powInt(x float64, n int) float64 {
	r := 1.0
	for ; n > 0; n >>= 1 {
		if n&1 == 1 {
			r *= x
		}
		x *= x
	}
	return r
}

// cutOff bounds (1/V) sum |k(t)| over the frequencies not kept; kept is the
// sum over those that are.
func (e *LatticeEvaluator) cutOff(kept float64) float64 {
	if e.kernel == Gaussian {
		// The sum over all frequencies is that of K_H over its periodic copies.
		return max(0, e.peak*(1+e.plan.copies)-kept)
	}
	return compactCutOff(e.kernel, e.h, e.plan.radius)
}

// compactCutOff bounds (1/V) sum |k(t)| over t'Ht > radius^2, radius >= d+2p:
// |k| <= Gamma(v+1) (2/s)^v (2/(pi s))^{1/2} (3/4)^{-1/4} for s >= 2v, v = d/2+p;
// a tenth is added for the sum over a lattice in place of the integral.
func compactCutOff(k Kernel, h BandwidthMatrix, radius float64) float64 {
	d, p := float64(h.d), float64(k.power())
	nu := d/2 + p
	rest := nu + 0.5 - d
	if rest <= 0 || radius < 2*nu {
		return math.Inf(1)
	}
	sphere := 2 * math.Pow(math.Pi, d/2) / gammaHalf(h.d)
	c := gammaHalf(h.d+2*k.power()+2) * math.Pow(2, nu) * math.Sqrt(2/math.Pi) * math.Pow(0.75, -0.25)
	return 1.1 * math.Pow(2*math.Pi, -d) / h.SqrtDet() * sphere * c * math.Pow(radius, -rest) / rest
}
