package bandwidth_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv"
)

// On real events the default is judged by events it has not seen: the integral
// of f^2 less twice the mean of f at the held-out half estimates the integrated
// squared error up to a constant, without bias. Over random halves the default
// must not lose to plug-in by more than two standard errors of the difference.
func TestDefaultOnHeldOutEvents(t *testing.T) {
	splits := 12
	if testing.Short() {
		splits = 3
	}
	for _, file := range []string{"fiji-quakes.csv", "us-airports.csv"} {
		var cols [][]float64
		if file == "fiji-quakes.csv" {
			cols = [][]float64{column(t, file, "long"), column(t, file, "lat")}
		} else {
			cols = [][]float64{column(t, file, "longitude"), column(t, file, "latitude")}
			cols = within(cols, -125, -66, 24, 50)
		}
		n := len(cols[0])
		var diff, square float64
		for r := range splits {
			order := rand.New(rand.NewPCG(8, uint64(r))).Perm(n)
			half := func(from, to int) [][]float64 {
				out := [][]float64{nil, nil}
				for _, i := range order[from:to] {
					out[0], out[1] = append(out[0], cols[0][i]), append(out[1], cols[1][i])
				}
				return out
			}
			train, test := half(0, n/2), half(n/2, n)
			e := eventsOf(t, train[0], train[1], 1, 1)
			s := sampleOf(t, train...)
			score := map[string]float64{}
			for _, m := range []string{"auto", "plug-in"} {
				c, err := bandwidth.Select(e, m, bandwidth.Options{})
				if err != nil {
					t.Fatal(err)
				}
				d, err := mv.NewDirect(s, mv.Gaussian, c.Matrix, mv.EvalOptions{Workers: 2})
				if err != nil {
					t.Fatal(err)
				}
				f := make([]float64, len(test[0]))
				if err := d.Density(context.Background(), f, test); err != nil {
					t.Fatal(err)
				}
				var mean float64
				for _, v := range f {
					mean += v / float64(len(f))
				}
				twice, err := c.Matrix.Scaled(2)
				if err != nil {
					t.Fatal(err)
				}
				score[m] = e.Spectrum.Functional(0, twice)[0] - 2*mean
				if r == 0 {
					t.Logf("%s, %s: H %s, %v", file, m, c.Matrix, c.Notes)
				}
			}
			v := (score["auto"] - score["plug-in"]) / math.Abs(score["plug-in"])
			diff += v / float64(splits)
			square += v * v / float64(splits)
		}
		se := math.Sqrt((square-diff*diff)/float64(splits)) + 1e-12
		t.Logf("%s: held-out score of auto less that of plug-in, relative: %.4f (standard error %.4f)", file, diff, se)
		if diff > 2*se {
			t.Errorf("%s: the default is worse than plug-in on held-out events by %.4f, standard error %.4f", file, diff, se)
		}
	}
}

// within keeps the points of a box.
func within(cols [][]float64, x0, x1, y0, y1 float64) [][]float64 {
	out := [][]float64{nil, nil}
	for i, x := range cols[0] {
		if y := cols[1][i]; x > x0 && x < x1 && y > y0 && y < y1 {
			out[0], out[1] = append(out[0], x), append(out[1], y)
		}
	}
	return out
}
