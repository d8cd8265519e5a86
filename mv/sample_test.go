package mv_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

func TestSampleDoor(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	for _, c := range []struct {
		name string
		cols [][]float64
		w    []float64
		kind error
		says string
	}{
		{"no columns", nil, nil, mv.ErrShape, "no columns"},
		{"no events", [][]float64{{}, {}}, nil, mv.ErrDegenerate, "2 columns with no events"},
		{"ragged", [][]float64{{1, 2}, {1}}, nil, mv.ErrShape, "column 1 has 2 events, column 2 has 1"},
		{"nan", [][]float64{{1, nan}}, nil, mv.ErrNotFinite, "event 2, column 1 is NaN"},
		{"inf", [][]float64{{1, 2}, {inf, 2}}, nil, mv.ErrNotFinite, "event 1, column 2 is +Inf"},
		{"weights length", [][]float64{{1, 2}}, []float64{1}, mv.ErrShape, "2 events, 1 weights"},
		{"weight nan", [][]float64{{1, 2}}, []float64{1, nan}, mv.ErrNotFinite, "weight 2 is NaN"},
		{"weight negative", [][]float64{{1, 2}}, []float64{1, -3}, mv.ErrShape, "weight 2 is -3"},
		{"weights zero", [][]float64{{1, 2}}, []float64{0, 0}, mv.ErrDegenerate, "2 weights sum to 0"},
		{"weights overflow", [][]float64{{1, 2}}, []float64{1e200, 1e200}, mv.ErrNotFinite, "divide them"},
	} {
		_, err := mv.NewSample(c.cols, c.w)
		if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
	for _, c := range [][][]float64{{{1, 2}, {3, 4}}, {{1, 2, 3, 4}, {2, 4, 6, 8}}, {{5, 5, 5}, {1, 1, 1}}} {
		s, err := mv.NewSample(c, nil)
		if err != nil {
			t.Fatal(err)
		}
		if err := s.RequireSpread(); !errors.Is(err, mv.ErrDegenerate) {
			t.Errorf("RequireSpread of %v: %v", c, err)
		}
	}
}

func TestSampleCopies(t *testing.T) {
	x, w := []float64{1, 2, 3}, []float64{1, 2, 1}
	s, err := mv.NewSample([][]float64{x}, w)
	if err != nil {
		t.Fatal(err)
	}
	x[0], w[0] = 9, 9
	if s.At(0, 0) != 1 || s.Weight(0) != 1 {
		t.Error("the sample shares its input")
	}
	mvtest.Near(t, "effective n", s.EffectiveN(), 16.0/6, 1e-15)
}

// Mean and covariance of the worked data set: computed two ways for METHODS
// section 0.
func TestMomentsWorked(t *testing.T) {
	m := mvtest.P12(2).Moments()
	c := m.Covariance()
	mvtest.NearAbs(t, "mean x", m.Mean()[0], 0.758333333, 1e-9)
	mvtest.NearAbs(t, "mean y", m.Mean()[1], 0.65, 1e-14)
	mvtest.Near(t, "S11", c[0], 1.3917424242, 1e-10)
	mvtest.Near(t, "S12", c[1], 0.6922727273, 1e-10)
	mvtest.Near(t, "S22", c[3], 0.8390909091, 1e-10)
}

func TestMomentsMerge(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	const n, d = 500, 3
	whole := mv.NewMoments(d)
	parts := []*mv.Moments{mv.NewMoments(d), mv.NewMoments(d), mv.NewMoments(d), mv.NewMoments(d)}
	for i := range n {
		// Far from the origin: a sum of squares would lose ten digits.
		x := []float64{5e5 + rng.NormFloat64(), -3e5 + rng.NormFloat64(), rng.NormFloat64()}
		w := rng.Float64()
		if i%7 == 0 {
			w = 0
		}
		whole.Add(x, w)
		parts[i%3].Add(x, w) // the fourth stays empty
	}
	for _, order := range [][]int{{0, 1, 2, 3}, {3, 2, 0, 1}} {
		sum := mv.NewMoments(d)
		for _, p := range order {
			if err := sum.Merge(parts[p]); err != nil {
				t.Fatal(err)
			}
		}
		if sum.Rows() != n {
			t.Errorf("%d rows", sum.Rows())
		}
		mvtest.Near(t, "weight", sum.SumWeights(), whole.SumWeights(), 1e-13)
		mvtest.Near(t, "effective n", sum.EffectiveN(), whole.EffectiveN(), 1e-13)
		for k := range d {
			mvtest.NearAbs(t, "mean", sum.Mean()[k], whole.Mean()[k], 1e-9)
		}
		for k, v := range whole.Covariance() {
			mvtest.NearAbs(t, "covariance", sum.Covariance()[k], v, 1e-10)
		}
	}
	if err := whole.Merge(mv.NewMoments(2)); !errors.Is(err, mv.ErrShape) {
		t.Errorf("merging another dimension: %v", err)
	}
}

func TestMultiIndices(t *testing.T) {
	if got := fmt.Sprint(mv.MultiIndices(2, 4)); got != "[[4 0] [3 1] [2 2] [1 3] [0 4]]" {
		t.Error(got)
	}
	if got := fmt.Sprint(mv.MultiIndices(3, 2)); got != "[[2 0 0] [1 1 0] [1 0 1] [0 2 0] [0 1 1] [0 0 2]]" {
		t.Error(got)
	}
	for d := 1; d <= 4; d++ {
		for r := 0; r <= 8; r++ {
			var sum float64
			for _, k := range mv.MultiIndices(d, r) {
				sum += mv.Multiplicity(k)
			}
			mvtest.Near(t, "multiplicities add to d^r", sum, math.Pow(float64(d), float64(r)), 0)
		}
	}
}

func ExampleSample() {
	s, err := mv.NewSample([][]float64{{0, 100, 300}, {0, 50, 50}}, []float64{1, 1, 2})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("n %d, d %d, effective n %.3f, mean %v\n", s.Len(), s.Dim(), s.EffectiveN(), s.Moments().Mean())
	// Output: n 3, d 2, effective n 2.667, mean [175 37.5]
}

func ExampleMoments() {
	a, b := mv.NewMoments(1), mv.NewMoments(1)
	a.Add([]float64{1}, 1)
	a.Add([]float64{2}, 1)
	b.Add([]float64{6}, 1)
	if err := a.Merge(b); err != nil {
		fmt.Println(err)
	}
	fmt.Println(a.Mean(), a.Covariance())
	// Output: [3] [7]
}
