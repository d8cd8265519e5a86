package mv

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// Method is one of the three ways to evaluate a density.
type Method uint8

// The methods. MethodAuto is the zero value: NewPlan chooses.
const (
	MethodAuto Method = iota
	MethodDirect
	MethodTree
	MethodLattice
)

var methodNames = [...]string{"auto", "direct", "tree", "lattice"}

// String returns "auto", "direct", "tree" or "lattice".
func (m Method) String() string {
	if int(m) < len(methodNames) {
		return methodNames[m]
	}
	return fmt.Sprintf("method(%d)", uint8(m))
}

// ParseMethod is the inverse of String; capitals do not matter.
func ParseMethod(name string) (Method, error) {
	for i, s := range methodNames {
		if strings.EqualFold(s, name) {
			return Method(i), nil
		}
	}
	return 0, fmt.Errorf("mv: no plan named %q; the names are %s", name, strings.Join(methodNames[:], ", "))
}

// PlanOptions steers NewPlan. The zero value is the default.
type PlanOptions struct {
	// Queries is how many points will be evaluated; 0 means as many as events.
	Queries int
	// Rtol and Atol bound the error at every query, |estimate - f| <= Atol +
	// Rtol*f, whichever method is taken. Both 0 means Rtol 1e-6.
	Rtol, Atol float64
	// Memory is the most bytes a lattice may take; 0 means 1 GiB.
	Memory int64
	// Workers is the number of goroutines; 0 means one per processor.
	Workers int
	// Force takes a method whatever it costs.
	Force Method
}

// Validate reports every setting out of its range.
func (o PlanOptions) Validate() error {
	if o.Queries < 0 || int(o.Force) >= len(methodNames) {
		return fmt.Errorf("mv: plan: %d queries (at least 0), method %s: %w", o.Queries, o.Force, ErrShape)
	}
	return LatticeOptions{Rtol: o.Rtol, Atol: o.Atol, Memory: o.Memory, Workers: o.Workers}.Validate()
}

// Plan is the choice of a method with its reasons. All figures are settled by
// the sizes, the kernel and the bandwidth, never by the machine: seconds are
// those of one core that evaluates 1e8 kernels a second. A Plan is a plain value.
type Plan struct {
	Method  Method
	Forced  bool
	Reason  string // one line
	Events  int
	Queries int
	Dim     int
	Kernel  Kernel
	Rtol    float64
	Atol    float64

	DirectSeconds  float64
	TreeSeconds    float64
	LatticeSeconds float64 // +Inf where no lattice fits or could keep the tolerance
	LatticeNodes   []int   // nil where there is none
	LatticeBytes   float64
	LatticeFault   string // why there is none

	opt PlanOptions
}

// NewPlan chooses the method with the least estimated cost for the sample,
// kernel, bandwidth matrix and number of queries.
func NewPlan(s *Sample, k Kernel, h BandwidthMatrix, opt PlanOptions) (Plan, error) {
	if err := checkModel(s, k, h); err != nil {
		return Plan{}, err
	}
	if err := opt.Validate(); err != nil {
		return Plan{}, err
	}
	if opt.Queries == 0 {
		opt.Queries = s.n
	}
	if opt.Rtol == 0 && opt.Atol == 0 {
		opt.Rtol = 1e-6
	}
	p := Plan{Events: s.n, Queries: opt.Queries, Dim: s.d, Kernel: k, Rtol: opt.Rtol, Atol: opt.Atol, opt: opt, LatticeSeconds: math.Inf(1)}
	n, m := float64(s.n), float64(opt.Queries)
	p.DirectSeconds = 1e-9 * n * m * (8 + float64(2*s.d))
	p.TreeSeconds = 1e-9 * treeWork(k, s.d, n, m)
	switch g, err := planLattice(s, k, h, LatticeOptions{Rtol: opt.Rtol, Atol: opt.Atol, Memory: opt.Memory}); {
	case errors.Is(err, ErrTooLarge):
		p.LatticeFault = "no lattice fits the memory"
	case err != nil:
		return Plan{}, err
	case g.order == 0:
		p.LatticeFault = fmt.Sprintf("no lattice keeps this tolerance with the %s kernel", k)
	default:
		build, query := g.work(s.n)
		p.LatticeNodes, p.LatticeBytes = g.nodes, g.cells()*bytesPerNode
		// With no absolute tolerance half of the queries are taken to lie too far
		// out for the lattice to certify.
		p.LatticeSeconds = 1e-9 * (build + m*query)
		if opt.Atol == 0 {
			p.LatticeSeconds += 1e-9 * treeWork(k, s.d, n, m/2)
		}
	}
	p.choose()
	return p, nil
}

// treeWork estimates the nanoseconds of one core to build a tree and to answer m queries; fits to
// measurements on clustered events, never more than the direct sum and a half.
func treeWork(k Kernel, d int, n, m float64) float64 {
	each := 2000 * math.Pow(5, float64(d-1))
	if k != Gaussian {
		each /= 2
	}
	each *= 1 + math.Log2(1+n/1e5)
	build := n * (300 + 150*float64(d))
	return build + m*min(each, n*(8+float64(2*d))*0.75)
}

func (p *Plan) choose() {
	if p.opt.Force != MethodAuto {
		p.Method, p.Forced, p.Reason = p.opt.Force, true, "asked for"
		return
	}
	p.Method = MethodDirect
	best := p.DirectSeconds
	if p.TreeSeconds < best {
		p.Method, best = MethodTree, p.TreeSeconds
	}
	if p.LatticeSeconds < best {
		p.Method = MethodLattice
	}
	switch p.Method {
	case MethodDirect:
		p.Reason = "so few pairs that nothing is gained by preparing"
	case MethodTree:
		p.Reason = p.LatticeFault
		if p.Reason == "" {
			p.Reason = "cheaper than a lattice of that many nodes"
		}
	case MethodLattice:
		p.Reason = "events and queries touch a few nodes each, whatever their number"
	}
}

// String says what was chosen, why, and what each way would cost.
func (p Plan) String() string {
	seconds := func(v float64) string { return fmt.Sprintf("%.2g s", v) }
	lattice := "none (" + p.LatticeFault + ")"
	if p.LatticeNodes != nil {
		sizes := strings.Trim(strings.ReplaceAll(fmt.Sprint(p.LatticeNodes), " ", "x"), "[]")
		lattice = fmt.Sprintf("%s (%s nodes, %.3g MB)", seconds(p.LatticeSeconds), sizes, p.LatticeBytes/1e6)
	}
	return fmt.Sprintf("%s: %s; %d events, %d queries, d = %d, %s kernel, rtol %g, atol %g; one core: direct %s, tree %s, lattice %s",
		p.Method, p.Reason, p.Events, p.Queries, p.Dim, p.Kernel, p.Rtol, p.Atol, seconds(p.DirectSeconds), seconds(p.TreeSeconds), lattice)
}

// Evaluator builds the evaluator of the method chosen. A forced lattice that
// does not fit is ErrTooLarge.
func (p Plan) Evaluator(s *Sample, k Kernel, h BandwidthMatrix) (Evaluator, error) {
	switch p.Method {
	case MethodTree:
		return NewTree(s, k, h, TreeOptions{Rtol: p.Rtol, Atol: p.Atol, Workers: p.opt.Workers})
	case MethodLattice:
		return NewLatticeEvaluator(s, k, h, LatticeOptions{Rtol: p.Rtol, Atol: p.Atol, Memory: p.opt.Memory, Workers: p.opt.Workers})
	}
	return NewDirect(s, k, h, EvalOptions{Workers: p.opt.Workers})
}
