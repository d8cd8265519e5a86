package spatial

import (
	"encoding/binary"
	"runtime"
	"sync"
	"sync/atomic"
)

// chunkRows is how many rows one piece of work holds. It is fixed, so that
// sums made chunk by chunk do not depend on the number of workers.
const chunkRows = 32

// chunksOf returns how many chunks n rows make.
func chunksOf(n int) int { return (n + chunkRows - 1) / chunkRows }

// forChunks calls f once for every chunk of rows [lo, hi) of n, on the given
// number of goroutines (all CPUs when 0). Chunks must not share what they write.
func forChunks(n, workers int, f func(chunk, lo, hi int)) {
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	total := chunksOf(n)
	workers = min(workers, total)
	var taken atomic.Int64
	work := func() {
		for {
			c := int(taken.Add(1)) - 1
			if c >= total {
				return
			}
			f(c, c*chunkRows, min(n, (c+1)*chunkRows))
		}
	}
	var wg sync.WaitGroup
	for range workers - 1 {
		wg.Go(work)
	}
	work()
	wg.Wait()
}

// countDiff returns the sum of |a[i]-b[i]| over the first n bytes. Both slices
// must reach at least 7 bytes beyond n.
func countDiff(a, b []uint8, n int) int32 {
	var sum int32
	for i := 0; i < n; i += 8 {
		if binary.LittleEndian.Uint64(a[i:]) == binary.LittleEndian.Uint64(b[i:]) {
			continue
		}
		for k := i; k < min(i+8, n); k++ {
			sum += int32(classGap(a[k], b[k]))
		}
	}
	return sum
}

// classGap returns |a-b|, the number of vertices on an edge.
func classGap(a, b uint8) int {
	if a > b {
		return int(a - b)
	}
	return int(b - a)
}

// activeCell is a cell whose corners differ, with the numbers of the first
// vertex on each of its edges. Corners run anticlockwise from lower left.
type activeCell struct {
	i, j       int // framed column and row of the lower left corner
	c          [4]uint8
	bottom     int32 // first vertex of each edge; within an edge vertices run left to right or bottom to top
	right      int32
	top        int32
	left       int32
	nb, nr, nt int32 // vertices on each edge
	nl         int32
}

// scanCells calls visit for each active cell of cell row j, left to right.
func (s *Isolines) scanCells(j int, visit func(*activeCell)) {
	lo, up := s.class[j*s.stride:], s.class[(j+1)*s.stride:]
	c := activeCell{j: j, bottom: s.hStart[j], top: s.hStart[j+1], left: s.vStart[j]}
	for i := 0; i <= s.nx; {
		w := binary.LittleEndian.Uint64(lo[i:])
		if w == binary.LittleEndian.Uint64(lo[i+1:]) &&
			w == binary.LittleEndian.Uint64(up[i:]) && w == binary.LittleEndian.Uint64(up[i+1:]) {
			i += 8
			continue
		}
		for end := min(i+8, s.nx+1); i < end; i++ {
			a, b, d, e := lo[i], lo[i+1], up[i+1], up[i]
			if a == b && b == d && d == e {
				continue
			}
			c.i, c.c = i, [4]uint8{a, b, d, e}
			c.nb, c.nr = int32(classGap(a, b)), int32(classGap(b, d))
			c.nt, c.nl = int32(classGap(e, d)), int32(classGap(a, e))
			c.right = c.left + c.nl
			visit(&c)
			c.bottom += c.nb
			c.top += c.nt
			c.left += c.nl
		}
	}
}

// vertexOn returns the vertex of level k on an edge that starts with vertex
// base and runs from class a to class b.
func vertexOn(base int32, a, b uint8, k int) int32 {
	if a < b {
		return base + int32(k-int(a))
	}
	return base + int32(int(a)-1-k)
}
