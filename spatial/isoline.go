package spatial

import (
	"errors"
	"fmt"
	"math"

	"drumlin/mv"
)

// ErrLevels reports levels that cannot be contoured: none finite, not strictly
// rising, or more than 254 of them.
var ErrLevels = errors.New("levels must be finite, strictly rising and at most 254")

// maxLevels keeps a node's class in one byte with one value to spare.
const maxLevels = 254

// defaultClamp is the least distance of a vertex from a lattice node, and of
// two vertices on one lattice edge, as a share of the edge.
const defaultClamp = 1.0 / 1024

// IsolineOptions says how isolines are drawn. The zero value is the default.
type IsolineOptions struct {
	Clamp   float64 // least distance of a vertex from a node, share of an edge; default 1/1024, at most 1/8
	Linear  bool    // plain linear interpolation on the edges instead of the cubic in the logarithm
	Workers int     // goroutines; default all CPUs. The result does not depend on it
}

// Isolines are all closed level curves of one function on a lattice at rising
// levels, with the forest of what contains what.
//
// A node is inside level k when its value is >= level k. Around the lattice
// stands a thin frame of nodes below every level, so every curve closes. Each
// lattice edge whose ends differ carries one vertex per level between them; in
// every cell the vertices of a level are joined by chords with the higher side
// on the left. Where a cell's corners alternate, the chords follow the saddle
// value of the bilinear interpolant. Vertices keep a distance from nodes and
// from each other and their order along an edge is the order of the levels, so
// curves neither meet nor touch, at one level or at two.
//
// Between curves lie faces. Face 0 is the background, face r+1 the face just
// inside ring r. The label of a face is the number of levels at or below the
// values in it.
//
// An Isolines is immutable and safe for concurrent reading. Cost: O(nodes) with
// a small constant plus O(vertices); memory one byte a node plus about 45 bytes
// a vertex. The rule for alternating corners is that of Nielson & Hamann 1991
// ("The asymptotic decider"; cited from memory).
type Isolines struct {
	g       mv.Grid
	levels  []float64
	logs    []float64
	opt     IsolineOptions
	nx, ny  int     // nodes of the lattice without the frame
	stride  int     // nx + 2
	fx, fy  float64 // width of the frame, metres
	class   []uint8 // label of every node, frame included, plus 8 bytes of slack
	hStart  []int32 // first vertex on the horizontal edges of framed row J
	vStart  []int32 // first vertex on the vertical edges of cell row J
	at      []XY    // vertices
	t       []float64
	next    []int32 // the vertex that follows, higher side on the left
	edge    []int32 // framed column of the vertex's edge
	level   []uint8
	ring    []int32 // ring of every vertex
	rings   []ringSpan
	order   []int32 // vertices ring by ring
	outer   []int32 // face around each ring
	label   []uint8 // label of each face (rings + 1)
	depth   []int32 // rings around each face
	after   []int32 // face right of each horizontal vertex
	area    []float64
	byDepth []int32 // faces but the background, deepest first
}

// ringSpan is one closed curve: a stretch of Isolines.order.
type ringSpan struct {
	first, last int32
	level       uint8
	high        bool // the inside is the higher side
}

// NewIsolines draws the level curves of g at the given levels.
//
// levels must be finite and strictly rising (ErrLevels); g must have two axes
// (mv.ErrShape) and finite values (mv.ErrNotFinite, naming the first node that
// is not). Where the values around an edge are positive, a vertex is placed by
// the four-point cubic through their logarithms (exact for a normal density),
// else by linear interpolation.
func NewIsolines(g mv.Grid, levels []float64, opt IsolineOptions) (*Isolines, error) {
	if g.Dim() != 2 || len(g.Values) != g.Len() {
		return nil, fmt.Errorf("spatial: isolines: a grid of %d axes with %d values: %w", g.Dim(), len(g.Values), mv.ErrShape)
	}
	if len(levels) > maxLevels {
		return nil, fmt.Errorf("spatial: isolines: %d levels: %w", len(levels), ErrLevels)
	}
	for k, v := range levels {
		if math.IsNaN(v) || math.IsInf(v, 0) || k > 0 && !(v > levels[k-1]) {
			return nil, fmt.Errorf("spatial: isolines: level %d is %g: %w", k, v, ErrLevels)
		}
	}
	if opt.Clamp <= 0 {
		opt.Clamp = defaultClamp
	}
	opt.Clamp = min(opt.Clamp, 1.0/8)
	s := &Isolines{
		g: g, levels: append([]float64(nil), levels...), opt: opt,
		nx: g.N[0], ny: g.N[1], stride: g.N[0] + 2,
		logs: make([]float64, len(levels)),
	}
	for k, v := range levels {
		s.logs[k] = math.Log(v) // NaN for levels <= 0, which no edge with positive ends carries
	}
	wide := opt.Clamp * float64(len(levels)+1)
	s.fx, s.fy = g.Step[0]*wide, g.Step[1]*wide
	if err := s.classify(); err != nil {
		return nil, err
	}
	if err := s.number(); err != nil {
		return nil, err
	}
	s.draw()
	s.trace()
	if err := s.nest(); err != nil {
		return nil, err
	}
	return s, nil
}

// Levels returns the levels. The slice must not be changed.
func (s *Isolines) Levels() []float64 { return s.levels }

// Window returns the area of the lattice with its frame, square metres: what
// the faces add up to.
func (s *Isolines) Window() float64 {
	return (float64(s.nx-1)*s.g.Step[0] + 2*s.fx) * (float64(s.ny-1)*s.g.Step[1] + 2*s.fy)
}

// nodeX returns the coordinate of framed column i.
func (s *Isolines) nodeX(i int) float64 {
	switch i {
	case 0:
		return s.g.Coord(0, 0) - s.fx
	case s.nx + 1:
		return s.g.Coord(0, s.nx-1) + s.fx
	}
	return s.g.Coord(0, i-1)
}

// nodeY returns the coordinate of framed row j.
func (s *Isolines) nodeY(j int) float64 {
	switch j {
	case 0:
		return s.g.Coord(1, 0) - s.fy
	case s.ny + 1:
		return s.g.Coord(1, s.ny-1) + s.fy
	}
	return s.g.Coord(1, j-1)
}

// classify fills class and refuses values that are not finite.
func (s *Isolines) classify() error {
	s.class = make([]uint8, s.stride*(s.ny+2)+8)
	bad := make([]int, chunksOf(s.ny))
	forChunks(s.ny, s.opt.Workers, func(c, lo, hi int) {
		bad[c] = -1
		for j := lo; j < hi; j++ {
			row := s.g.Values[j*s.nx : (j+1)*s.nx]
			out := s.class[(j+1)*s.stride+1:][:s.nx]
			if i := classifyRow(row, out, s.levels); i >= 0 && bad[c] < 0 {
				bad[c] = j*s.nx + i
			}
		}
	})
	for _, n := range bad {
		if n >= 0 {
			return fmt.Errorf("spatial: isolines: value %g at node (%d, %d): %w", s.g.Values[n], n%s.nx, n/s.nx, mv.ErrNotFinite)
		}
	}
	return nil
}

// classifyRow writes how many levels are at or below each value and returns
// the first index whose value is not finite, or -1.
func classifyRow(row []float64, out []uint8, levels []float64) int {
	below, above := -math.MaxFloat64, math.Inf(1) // the class c holds below <= v < above
	if len(levels) > 0 {
		above = levels[0]
	}
	c := 0
	for i, v := range row {
		if v >= below && v < above {
			out[i] = uint8(c)
			continue
		}
		if v-v != 0 {
			return i
		}
		for c < len(levels) && v >= levels[c] {
			c++
		}
		for c > 0 && v < levels[c-1] {
			c--
		}
		below, above = -math.MaxFloat64, math.Inf(1)
		if c > 0 {
			below = levels[c-1]
		}
		if c < len(levels) {
			above = levels[c]
		}
		out[i] = uint8(c)
	}
	return -1
}

// number counts the vertices of every row of edges and gives each row its
// stretch: horizontal edges of row 0, vertical edges above it, row 1, ...
func (s *Isolines) number() error {
	rows := s.ny + 2
	h, v := make([]int32, rows), make([]int32, rows)
	forChunks(rows, s.opt.Workers, func(_, lo, hi int) {
		for j := lo; j < hi; j++ {
			h[j] = countDiff(s.class[j*s.stride:], s.class[j*s.stride+1:], s.stride-1)
			if j+1 < rows {
				v[j] = countDiff(s.class[j*s.stride:], s.class[(j+1)*s.stride:], s.stride)
			}
		}
	})
	s.hStart, s.vStart = make([]int32, rows+1), make([]int32, rows)
	n := 0
	for j := range rows {
		s.hStart[j] = int32(n)
		s.vStart[j] = int32(n + int(h[j]))
		if n += int(h[j]) + int(v[j]); n > math.MaxInt32 {
			return fmt.Errorf("spatial: isolines: more than %d vertices: %w", math.MaxInt32, mv.ErrTooLarge)
		}
	}
	s.hStart[rows] = int32(n)
	s.at, s.t = make([]XY, n), make([]float64, n)
	s.next, s.edge, s.level = make([]int32, n), make([]int32, n), make([]uint8, n)
	return nil
}
