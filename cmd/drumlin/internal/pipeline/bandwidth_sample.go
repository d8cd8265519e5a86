package pipeline

import (
	"cmp"
	"context"
	"math"
	"slices"

	"drumlin/io/events"
	"drumlin/mv"
)

// drawSample reads the events once more and keeps bandwidth.SubSample of them
// for likelihood cross-validation: those whose positions have the least hash,
// which is a property of the set of events, not of their order or of how the
// files are split. Events at one place are kept or left together.
func (r *reading) drawSample(ctx context.Context, sources []events.Source, w *pool, box *mv.Box, most int) (*mv.Sample, error) {
	states := make([]keeper, max(1, w.workers))
	for i := range states {
		states[i].most = most
	}
	screen := r.screen()
	accounts := make([]events.Account, len(states)) // counted before, when the tally was made
	account := func(worker int) (*events.Account, []int64) { return &accounts[worker], nil }
	_, err := r.rows(ctx, sources, w, r.columns(), account, func(worker, _ int, b events.Batch, _ *picker) error {
		n := screen.Apply(b, &accounts[worker])
		weights := []float64(nil)
		if screen.Weighted {
			weights = b.Columns[2][:n]
		}
		p := r.project(b.Columns[0][:n], b.Columns[1][:n])
		if r.area != nil {
			p.X, p.Y, weights = r.area.drop(p.X, p.Y, weights, &accounts[worker])
		}
		for i, x := range p.X {
			if y := p.Y[i]; x >= box.Min[0] && x <= box.Max[0] && y >= box.Min[1] && y <= box.Max[1] {
				k := kept{hash: positionHash(x, y), x: x, y: y, w: 1}
				if weights != nil {
					k.w = weights[i]
				}
				states[worker].add(k)
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	all := states[0]
	for _, s := range states[1:] {
		for _, k := range s.kept {
			all.add(k)
		}
	}
	all.cut()
	cols, weights := [][]float64{nil, nil}, []float64(nil)
	for _, k := range all.kept {
		cols[0], cols[1] = append(cols[0], k.x), append(cols[1], k.y)
		if r.weight != "" && k.w > 0 {
			weights = append(weights, k.w)
		}
	}
	if r.weight != "" && len(weights) < len(cols[0]) {
		weights = nil
	}
	return mv.NewSample(cols, weights)
}

// kept is one event of a sample.
type kept struct {
	hash    uint64
	x, y, w float64
}

// keeper keeps the events with the least hashes.
type keeper struct {
	most int
	kept []kept
}

func (k *keeper) add(e kept) {
	k.kept = append(k.kept, e)
	if len(k.kept) >= 4*k.most {
		k.cut()
	}
}

// cut sorts by hash, then position and weight, and drops what is beyond most.
func (k *keeper) cut() {
	slices.SortFunc(k.kept, func(a, b kept) int {
		return cmp.Or(cmp.Compare(a.hash, b.hash), cmp.Compare(a.x, b.x), cmp.Compare(a.y, b.y), cmp.Compare(a.w, b.w))
	})
	k.kept = k.kept[:min(len(k.kept), k.most)]
}

// positionHash mixes the bits of a position (the finaliser of splitmix64).
func positionHash(x, y float64) uint64 {
	h := math.Float64bits(x)*0x9e3779b97f4a7c15 ^ math.Float64bits(y)
	for range 2 {
		h ^= h >> 30
		h *= 0xbf58476d1ce4e5b9
		h ^= h >> 27
		h *= 0x94d049bb133111eb
		h ^= h >> 31
	}
	return h
}

// occupiedBox returns the box of a tally's nodes that carry something.
func occupiedBox(t *mv.Tally) *mv.Box {
	lo, hi := t.Bounds()
	b := &mv.Box{}
	for k := range 2 {
		b.Min[k], b.Max[k] = float64(lo[k])*t.Step(), float64(hi[k])*t.Step()
	}
	return b
}
