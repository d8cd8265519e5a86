package bandwidth_test

import (
	"encoding/json"
	"errors"
	"math"
	"os"
	"strings"
	"testing"

	"drumlin/bandwidth"
)

// rColumn is what base R's functions say of one column (testdata/reference).
type rColumn struct {
	N         int
	SD        float64
	IQR       float64
	Nrd0, Nrd float64
	UCV       float64
	BCV       float64
	STE       float64 `json:"sj_ste"`
	DPI       float64 `json:"sj_dpi"`
}

func rReference(t *testing.T) (columns map[string]rColumn, precip []float64) {
	t.Helper()
	b, err := os.ReadFile("../testdata/reference/r_bandwidth.json")
	if err != nil {
		t.Fatal(err)
	}
	var f struct {
		Precip  []float64
		Columns map[string]rColumn
	}
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	return f.Columns, f.Precip
}

// The univariate rules: exact values of METHODS.md 4.8 (unbinned, computed
// there) to 1e-6, minimisers to 1e-5, R's own, whose binning and stopping rule cost up to 2 %, to
// 2 %.
func TestUnivariateRules(t *testing.T) {
	ref, precip := rReference(t)
	nan := math.NaN()
	for _, c := range []struct {
		name                                 string
		dpi, dpiLess, ste, ucv, ucvLess, bcv float64
	}{
		{"faithful.eruptions", 0.16553413, 0.16536725, 0.1396831046, 0.10318358, 0.10262667, 0.15756687},
		{"faithful.waiting", 2.6356039, 2.6331729, 2.496844598, 2.6582235, 2.6394153, 2.5946589},
		{"precip", 4.0385918, 4.0232434, 3.942012389, 4.8539424, 4.8014900, nan},
		{"fiji-quakes.lat", 1.0727717, 1.0724634, 1.042334331, 0.15653709, 0.15634065, 1.3474312},
		{"fiji-quakes.long", 0.38581709, 0.38570769, 0.3175399949, nan, nan, 0.48583899},
		{"fiji-quakes.depth", 20.414429, 20.408306, 13.72873568, nan, nan, 11.251668},
	} {
		if testing.Short() && strings.HasPrefix(c.name, "fiji") {
			continue
		}
		x := precip
		if file, name, ok := strings.Cut(c.name, "."); ok {
			x = column(t, file+".csv", name)
		}
		r := ref[c.name]
		square, err := bandwidth.NewUnivariate(x, bandwidth.SquareN)
		if err != nil {
			t.Fatal(err)
		}
		less, err := bandwidth.NewUnivariate(x, bandwidth.NTimesLess)
		if err != nil {
			t.Fatal(err)
		}
		near(t, c.name+" nrd0", square.Rule0(), r.Nrd0, 1e-9)
		near(t, c.name+" nrd", square.Rule(), r.Nrd, 1e-9)
		near(t, c.name+" DPI n^2", square.PlugIn(), c.dpi, 1e-6)
		near(t, c.name+" DPI n(n-1)", less.PlugIn(), c.dpiLess, 1e-6)
		near(t, c.name+" DPI R", less.PlugIn(), r.DPI, 0.02)
		ste, err := less.SolveTheEquation()
		if err != nil {
			t.Fatal(err)
		}
		near(t, c.name+" STE", ste, c.ste, 1e-6)
		near(t, c.name+" STE R", ste, r.STE, 0.02)
		check := func(what string, got float64, err error, want, r float64) {
			t.Helper()
			if math.IsNaN(want) {
				if !errors.Is(err, bandwidth.ErrNoMinimum) {
					t.Errorf("%s %s: %g, %v; there is no minimum inside the range", c.name, what, got, err)
				}
				return
			}
			if err != nil {
				t.Errorf("%s %s: %v", c.name, what, err)
				return
			}
			near(t, c.name+" "+what, got, want, 1e-5)
			if r > 0 {
				near(t, c.name+" R "+what, got, r, 0.02)
			}
		}
		ucv, err := square.UnbiasedCV()
		if c.name == "fiji-quakes.lat" {
			r.UCV = 0 // the end of R's range, as its note says
		}
		check("UCV n^2", ucv, err, c.ucv, r.UCV)
		ucv, err = less.UnbiasedCV()
		check("UCV n(n-1)", ucv, err, c.ucvLess, 0)
		bcv, err := square.BiasedCV()
		check("BCV", bcv, err, c.bcv, r.BCV)
	}
	square, err := bandwidth.NewUnivariate(column(t, "faithful.csv", "eruptions"), bandwidth.SquareN)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "psi6 at g1", square.Psi(6, 0.7533248), -7.2833187, 1e-6)
	near(t, "psi4 at g2", square.Psi(4, 0.38297124), 8.3442704, 1e-6)
}
