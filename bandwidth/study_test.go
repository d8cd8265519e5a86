package bandwidth_test

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv/mvtest"
)

// result is a row of a committed study.
type result struct {
	mean, se   float64
	replicates int
}

// committed reads testdata/reference/study_N.csv: by target and selector.
func committed(t *testing.T, n string) (map[[2]string]result, []string) {
	t.Helper()
	f, err := os.Open("../testdata/reference/study_" + n + ".csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	out := map[[2]string]result{}
	var targets []string
	for _, row := range rows[1:] {
		number := func(i int) float64 {
			v, err := strconv.ParseFloat(row[i], 64)
			if err != nil {
				t.Fatal(err)
			}
			return v
		}
		if len(targets) == 0 || targets[len(targets)-1] != row[0] {
			targets = append(targets, row[0])
		}
		out[[2]string{row[0], row[2]}] = result{number(5), number(6), int(number(3))}
	}
	return out, targets
}

// The committed study holds what the package comment claims of auto: at n = 1,000
// at most 1.20 on every target and 1.10 on average, at n = 100 at most 1.45.
func TestCommittedStudy(t *testing.T) {
	for n, goal := range map[string][2]float64{"100": {1.45, 1.45}, "1000": {1.20, 1.10}, "10000": {1.20, 1.10}} {
		table, targets := committed(t, n)
		if len(targets) != 15 {
			t.Errorf("n=%s: %d targets, want 15", n, len(targets))
		}
		var mean float64
		for _, name := range targets {
			r := table[[2]string{name, "auto"}]
			mean += r.mean / float64(len(targets))
			if !(r.mean > 0) || r.mean > goal[0] {
				t.Errorf("n=%s, target %s: ratio %.3f (standard error %.3f), goal %.2f", n, name, r.mean, r.se, goal[0])
			}
		}
		if mean > goal[1] {
			t.Errorf("n=%s: mean ratio %.3f, goal %.2f", n, mean, goal[1])
		}
	}
}

// A small study guards against regressions: the first replicates of the
// committed one, drawn again with its seeds. Their mean must lie within four
// standard errors of the committed mean, the error being the replicates' spread
// (se * sqrt(committed replicates)) over the root of how many are run here.
func TestStudyAgain(t *testing.T) {
	replicates, run := 10, []string{"B", "D", "I", "S2"}
	if testing.Short() {
		replicates, run = 4, []string{"D", "S2"}
	}
	table, targets := committed(t, "1000")
	for _, name := range run {
		seed := uint64(2026)
		for i, other := range targets {
			if other == name {
				seed += uint64(i)
			}
		}
		lab, err := bandwidth.NewLab(mvtest.Target(name), 1000, 256, 1024)
		if err != nil {
			t.Fatal(err)
		}
		scores, err := lab.Run(t.Context(), seed, replicates, bandwidth.Entrants()[:2], 2)
		if err != nil {
			t.Fatal(err)
		}
		for _, s := range scores {
			want := table[[2]string{name, s.Entrant.Name}]
			allowed := 4 * want.se * math.Sqrt(float64(want.replicates)/float64(replicates))
			if math.Abs(s.Mean-want.mean) > allowed {
				t.Errorf("%s, %s: mean ratio %.3f over %d replicates, %.3f in the committed study, allowed difference %.3f", name, s.Entrant.Name, s.Mean, replicates, want.mean, allowed)
			}
		}
	}
}
