package spatial_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// Four squares tile a study area; events are known exactly.
func TestZones(t *testing.T) {
	plane, _ := spatial.NewProjection(spatial.CRS{Method: "plane"})
	l := latticeOver(-500, 4500, 50)
	put := func(a *spatial.Analysis, r *rand.Rand, x, y float64, n int) {
		for range n {
			u, v := (x+2000*r.Float64()-l.Origin[0])/50, (y+2000*r.Float64()-l.Origin[1])/50
			i, j := int(u), int(v)
			u, v = u-float64(i), v-float64(j)
			c := a.Counts.Values[j*l.N[0]+i:]
			c[0] += (1 - u) * (1 - v)
			c[1] += u * (1 - v)
			c[l.N[0]] += (1 - u) * v
			c[l.N[0]+1] += u * v
		}
	}
	w := areaOf(t, [][]float64{{0, 0, 4000, 0, 4000, 4000, 0, 4000}})
	square := func(x, y float64) *spatial.StudyArea {
		z, err := w.Within(areaOf(t, [][]float64{{x - 100, y - 100, x + 2000, y - 100, x + 2000, y + 2000, x - 100, y + 2000}}))
		if err != nil {
			t.Fatal(err)
		}
		return z
	}
	if z, err := w.Within(areaOf(t, [][]float64{{9000, 0, 9100, 0, 9000, 100}})); err != nil || z != nil {
		t.Errorf("a zone elsewhere: %v %v", z, err)
	}
	if got := square(0, 0).Area(); got != 4e6 {
		t.Errorf("cut to the study area: %g", got)
	}
	for _, c := range []struct {
		name  string
		n     [4]int
		least float64
		want  [4]string
	}{
		{"all large", [4]int{500, 400, 300, 200}, 10, [4]string{}},
		{"one small: the next goes with it", [4]int{500, 400, 5, 200}, 10, [4]string{"", "", "few events", "so that another cannot be worked out"}},
		{"two small and together too few", [4]int{500, 400, 2, 3}, 10, [4]string{"", "so that another cannot be worked out", "few events", "few events"}},
		{"no guard", [4]int{500, 400, 2, 3}, 0, [4]string{}},
	} {
		r := rand.New(rand.NewPCG(3, 3))
		a := spatial.Analysis{Density: mv.NewGrid(l), Counts: mv.NewGrid(l), KernelAtZero: 1, Area: w, RegionRule: "events"}
		total := 0
		for k, n := range c.n {
			put(&a, r, float64(k%2)*2000, float64(k/2)*2000, n)
			total += n
		}
		a.Events, a.Total = float64(total), float64(total)
		for i := range a.Density.Values {
			a.Density.Values[i] = 1 / 16e6
		}
		a.BandLevels = []float64{1e-8}
		ids := []string{"a", "b", "c", "d"}
		tiles := [4][2]float64{{0, 0}, {2000, 0}, {0, 2000}, {2000, 2000}}
		for k, at := range tiles {
			z := areaOf(t, [][]float64{{at[0], at[1], at[0] + 2000, at[1], at[0] + 2000, at[1] + 2000, at[0], at[1] + 2000}})
			a.Zones = append(a.Zones, spatial.ZoneArea{ID: ids[k], Name: "Zone " + ids[k], Area: z})
		}
		rel, err := spatial.Guard(a, spatial.Policy{MinEvents: c.least}, plane)
		if err != nil {
			t.Fatal(err)
		}
		for k, z := range rel.Zones() {
			if z.Withheld != c.want[k] {
				t.Errorf("%s: zone %s is withheld for %q, want %q", c.name, z.ID, z.Withheld, c.want[k])
			}
			if z.Withheld != "" {
				if !math.IsNaN(z.Expected) || !math.IsNaN(z.Events.Min) || !math.IsNaN(z.MeanPerKM2) || !math.IsNaN(z.HighestPerKM2) {
					t.Errorf("%s: a withheld zone tells %+v", c.name, z)
				}
				continue
			}
			n := float64(c.n[k])
			if !(z.Events.Min <= n && n <= z.Events.Max && math.Abs(z.Events.Estimate-n) < 12) {
				t.Errorf("%s: zone %s has %+v, truly %g", c.name, z.ID, z.Events, n)
			}
			nearly(t, "expected", z.Expected, float64(total)/4, 1e-6*float64(total))
			nearly(t, "mean", z.MeanPerKM2, float64(total)/16, 1e-6*float64(total))
			nearly(t, "highest", z.HighestPerKM2, float64(total)/16, 1e-6*float64(total))
		}
	}
}
