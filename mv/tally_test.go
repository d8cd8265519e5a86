package mv_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
)

func mustTally(t testing.TB, opt mv.TallyOptions) *mv.Tally {
	t.Helper()
	ta, err := mv.NewTally(opt)
	if err != nil {
		t.Fatal(err)
	}
	return ta
}

func dense(t testing.TB, ta *mv.Tally, weights bool) mv.Grid {
	t.Helper()
	lo, hi := ta.Bounds()
	g, err := ta.Grid(lo, hi, weights)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func sameGrid(t testing.TB, what string, a, b mv.Grid) {
	t.Helper()
	if len(a.Values) != len(b.Values) || a.Origin[0] != b.Origin[0] || a.Origin[1] != b.Origin[1] || a.Step[0] != b.Step[0] {
		t.Fatalf("%s: lattices differ: %v %v %v against %v %v %v", what, a.Origin, a.Step, a.N, b.Origin, b.Step, b.N)
	}
	for i := range a.Values {
		if a.Values[i] != b.Values[i] {
			t.Fatalf("%s: node %d holds %v against %v", what, i, a.Values[i], b.Values[i])
		}
	}
}

// towns returns n events in three clumps, rotated, off the origin.
func towns(seed uint64, n int) (x, y, w []float64) {
	rng := rand.New(rand.NewPCG(seed, 7))
	for i := range n {
		u, v := rng.NormFloat64(), rng.NormFloat64()
		c := float64(i % 3)
		x = append(x, -70000+9000*c+1500*u+900*v)
		y = append(y, 41000-7000*c*c+600*u-300*v)
		w = append(w, 0.25+math.Abs(rng.NormFloat64()))
	}
	return x, y, w
}

func TestTallyMatchesItsDefinition(t *testing.T) {
	ta := mustTally(t, mv.TallyOptions{})
	// One event at (10.25, -3.5) on a lattice of 1 m: corners by hand.
	if err := ta.Add([]float64{10.25}, []float64{-3.5}, nil); err != nil {
		t.Fatal(err)
	}
	if ta.Step() != 1 {
		t.Fatalf("step %g, want 1", ta.Step())
	}
	g, err := ta.Grid([2]int64{10, -4}, [2]int64{11, -3}, false)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []float64{0.75 * 0.5, 0.25 * 0.5, 0.75 * 0.5, 0.25 * 0.5} {
		if g.Values[i] != want {
			t.Errorf("node %d: %v, want %v", i, g.Values[i], want)
		}
	}
}

// Any order, any split, any number of tallies: the same bits.
func TestTallyIsAPropertyOfTheSet(t *testing.T) {
	x, y, w := towns(1, 20000)
	for _, weighted := range []bool{false, true} {
		opt := mv.TallyOptions{Tiles: 64, Weighted: weighted}
		weights := func(lo, hi int) []float64 {
			if weighted {
				return w[lo:hi]
			}
			return nil
		}
		whole := mustTally(t, opt)
		if err := whole.Add(x, y, weights(0, len(x))); err != nil {
			t.Fatal(err)
		}
		want := dense(t, whole, weighted)
		for _, shards := range []int{2, 5, 7} {
			sum := mustTally(t, opt)
			for s := shards - 1; s >= 0; s-- {
				lo, hi := s*len(x)/shards, (s+1)*len(x)/shards
				part := mustTally(t, opt)
				for a := lo; a < hi; a += 777 {
					b := min(hi, a+777)
					if err := part.Add(x[a:b], y[a:b], weights(a, b)); err != nil {
						t.Fatal(err)
					}
				}
				if err := sum.Merge(part); err != nil {
					t.Fatal(err)
				}
			}
			if sum.Level() != whole.Level() || sum.Tiles() != whole.Tiles() || sum.Events() != whole.Events() || sum.TotalWeight() != whole.TotalWeight() || sum.EffectiveN() != whole.EffectiveN() {
				t.Fatalf("%d shards: level %d tiles %d events %d weight %v, want %d %d %d %v", shards, sum.Level(), sum.Tiles(), sum.Events(), sum.TotalWeight(), whole.Level(), whole.Tiles(), whole.Events(), whole.TotalWeight())
			}
			sameGrid(t, "shards", dense(t, sum, weighted), want)
		}
	}
}

// Coarsening gives to the bit what binning on the coarser lattice gives.
func TestCoarsenEqualsBinningCoarsely(t *testing.T) {
	x, y, w := towns(2, 3000)
	for _, grain := range []int{-6, -16} {
		fine := mustTally(t, mv.TallyOptions{Grain: grain, Finest: 2, Weighted: true, Tiles: 1 << 20})
		if err := fine.Add(x, y, w); err != nil {
			t.Fatal(err)
		}
		for level := 3; level <= 6; level++ {
			fine.Coarsen()
			coarse := mustTally(t, mv.TallyOptions{Grain: grain, Finest: level, Weighted: true, Tiles: 1 << 20})
			if err := coarse.Add(x, y, w); err != nil {
				t.Fatal(err)
			}
			if fine.Level() != level || fine.Tiles() != coarse.Tiles() {
				t.Fatalf("level %d tiles %d, want %d %d", fine.Level(), fine.Tiles(), coarse.Level(), coarse.Tiles())
			}
			sameGrid(t, "counts", dense(t, fine, false), dense(t, coarse, false))
			sameGrid(t, "weights", dense(t, fine, true), dense(t, coarse, true))
		}
	}
}

// Sums pass one word: many events at one node with a step of 2^22 grains.
func TestTallyTwoWords(t *testing.T) {
	ta := mustTally(t, mv.TallyOptions{Grain: -18, Finest: 4})
	x := make([]float64, 1<<15) // 2^44 quanta an event, 2^65 in all
	for range 64 {
		if err := ta.Add(x, x, nil); err != nil {
			t.Fatal(err)
		}
	}
	g, err := ta.Grid([2]int64{0, 0}, [2]int64{0, 0}, false)
	if err != nil {
		t.Fatal(err)
	}
	if want := float64(64 << 15); g.Values[0] != want || ta.Events() != 64<<15 {
		t.Errorf("node holds %v of %d events, want %v", g.Values[0], ta.Events(), want)
	}
	c := ta.Clone()
	c.Coarsen()
	if g, _ := c.Grid([2]int64{0, 0}, [2]int64{0, 0}, false); g.Values[0] != 64<<15 {
		t.Errorf("after coarsening: %v", g.Values[0])
	}
	if err := ta.Merge(c); err != nil {
		t.Fatal(err)
	}
	if g, _ := ta.Grid([2]int64{0, 0}, [2]int64{0, 0}, false); g.Values[0] != 128<<15 {
		t.Errorf("after merging: %v", g.Values[0])
	}
}

// Total, first and second moments of the nodes (linear binning keeps the first
// two exactly and adds t(1-t) step^2 to the third).
func TestTallyMoments(t *testing.T) {
	x, y, _ := towns(3, 5000)
	ta := mustTally(t, mv.TallyOptions{Tiles: 256})
	if err := ta.Add(x, y, nil); err != nil {
		t.Fatal(err)
	}
	g := dense(t, ta, false)
	var sum, sx, sy, wantX, wantY float64
	for i, v := range g.Values {
		sum += v
		sx += v * g.Coord(0, i%g.N[0])
		sy += v * g.Coord(1, i/g.N[0])
	}
	for i := range x {
		wantX += math.RoundToEven(x[i]*64) / 64
		wantY += math.RoundToEven(y[i]*64) / 64
	}
	if sum != 5000 {
		t.Errorf("node weights add to %v, want 5000 exactly", sum)
	}
	if math.Abs(sx-wantX) > 1e-6*math.Abs(wantX) || math.Abs(sy-wantY) > 1e-6*math.Abs(wantY) {
		t.Errorf("first moments %v %v, want %v %v", sx, sy, wantX, wantY)
	}
}

func TestTrimStrays(t *testing.T) {
	x, y, _ := towns(4, 4000)
	for range 12 { // a handful of rows set at 0,0 by mistake, far away
		x, y = append(x, 5e6), append(y, -4e6)
	}
	ta := mustTally(t, mv.TallyOptions{})
	if err := ta.Add(x, y, nil); err != nil {
		t.Fatal(err)
	}
	if gone := ta.TrimStrays(); gone != 12 || ta.Events() != 4000 || ta.Outside() != 12 {
		t.Errorf("trimmed %d, left %d, outside %d; want 12, 4000, 12", gone, ta.Events(), ta.Outside())
	}
	lo, hi := ta.Bounds()
	if span := float64(hi[0]-lo[0]) * ta.Step(); span > 60000 {
		t.Errorf("extent still %g m wide", span)
	}
}

func TestTallyBox(t *testing.T) {
	x, y, _ := towns(5, 4000)
	box := &mv.Box{Min: [2]float64{-72000, 30000}, Max: [2]float64{-60000, 50000}}
	want := 0
	for i := range x {
		if x[i] >= box.Min[0] && x[i] <= box.Max[0] && y[i] >= box.Min[1] && y[i] <= box.Max[1] {
			want++
		}
	}
	ta := mustTally(t, mv.TallyOptions{Box: box})
	if err := ta.Add(x, y, nil); err != nil {
		t.Fatal(err)
	}
	if int(ta.Events()) != want || int(ta.Outside()) != len(x)-want {
		t.Errorf("%d inside, %d outside; want %d, %d", ta.Events(), ta.Outside(), want, len(x)-want)
	}
	var sum float64
	for _, v := range dense(t, ta, false).Values {
		sum += v
	}
	if int(sum) != want {
		t.Errorf("node weights add to %v, want %d", sum, want)
	}
}

func TestTallyRefuses(t *testing.T) {
	ta := mustTally(t, mv.TallyOptions{})
	for _, v := range []float64{math.NaN(), math.Inf(1), 1e15} {
		if err := ta.Add([]float64{v}, []float64{0}, nil); !errors.Is(err, mv.ErrNotFinite) {
			t.Errorf("x = %v: %v", v, err)
		}
	}
	tw := mustTally(t, mv.TallyOptions{Weighted: true})
	for _, v := range []float64{math.NaN(), -1, 1e14} {
		if err := tw.Add([]float64{0}, []float64{0}, []float64{v}); !errors.Is(err, mv.ErrNotFinite) {
			t.Errorf("weight %v: %v", v, err)
		}
	}
	if err := ta.Merge(tw); !errors.Is(err, mv.ErrIncompatible) {
		t.Errorf("merge of unlike tallies: %v", err)
	}
	if _, err := mv.NewTally(mv.TallyOptions{Grain: 3, Finest: 4}); !errors.Is(err, mv.ErrShape) {
		t.Errorf("step of 2 grains: %v", err)
	}
}

func BenchmarkTally(b *testing.B) {
	const n = 1 << 20
	rng := rand.New(rand.NewPCG(9, 9))
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		u, v := rng.NormFloat64(), rng.NormFloat64()
		x[i], y[i] = 12000*u+3000*v, 4000*u-9000*v
	}
	ta := mustTally(b, mv.TallyOptions{})
	for b.Loop() {
		for at := 0; at < n; at += 1 << 15 {
			if err := ta.Add(x[at:at+1<<15], y[at:at+1<<15], nil); err != nil {
				b.Fatal(err)
			}
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/n, "ns/event")
	b.ReportMetric(float64(ta.Tiles()), "tiles")
}
