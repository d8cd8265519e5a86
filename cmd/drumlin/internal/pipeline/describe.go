package pipeline

import (
	"fmt"
	"io"
	"math"
	"strings"

	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/spatial"
)

// Describe says in plain words what a run found.
func Describe(w io.Writer, res *Result) {
	rec := res.Record
	fmt.Fprintf(w, "%s events mapped", progress.Count(rec.Rows.Used))
	var left []string
	for _, s := range rec.Rows.SetAside {
		left = append(left, fmt.Sprintf("%s %s", progress.Count(s.Rows), strings.ReplaceAll(s.Reason, "-", " ")))
	}
	if n := rec.Rows.OutsideExtent; n > 0 {
		left = append(left, fmt.Sprintf("%s far outside the rest", progress.Count(n)))
	}
	if len(left) > 0 {
		fmt.Fprintf(w, "; left out of %s rows: %s", progress.Count(rec.Rows.Read), strings.Join(left, ", "))
	}
	fmt.Fprintln(w, ".")
	if p := rec.Period; p != nil {
		fmt.Fprintf(w, "They are from %s to %s; the period counts %s years.\n", p.First, p.Last, Significant(p.Years))
	}
	var whole float64
	if r := res.Release.Regions(); len(r) > 0 {
		whole = r[len(r)-1].AreaKM2
	}
	for _, r := range res.Release.Regions() {
		fmt.Fprintf(w, "%2.0f %% of events: %s on %s km2", 100*r.Content, parts(len(r.Plane)), Significant(r.AreaKM2))
		if r.AreaKM2 < whole {
			fmt.Fprintf(w, " (%s %% of the widest region)", Significant(100*r.AreaKM2/whole))
		}
		fmt.Fprintf(w, ", %s of the recorded events inside (%.1f %%).\n", progress.Count(int64(math.Round(r.Events.Estimate))), 100*r.EventShare)
	}
	for i, p := range res.Release.Peaks() {
		if i == 3 {
			fmt.Fprintf(w, "... and %d lower peaks.\n", len(res.Release.Peaks())-3)
			break
		}
		smoothing := "smoothing takes off about " + Significant(math.Max(0, -p.SmoothingBiasPerKM2))
		if math.IsNaN(p.SmoothingBiasPerKM2) {
			smoothing = "what smoothing takes off so near the edge is not known"
		}
		fmt.Fprintf(w, "Peak %d at %s: %s events per km2, standard error %s; %s.\n",
			p.Rank, Place(p.Position, rec.CRS.Plane.Method), Significant(p.IntensityPerKM2), Significant(p.StandardErrorPerKM2), smoothing)
	}
	b := rec.Bandwidth
	fmt.Fprintf(w, "Bandwidth (%s, %s): %s m along bearing %.0f degrees, %s m across.\n", b.Method, b.Shape, Significant(b.Major), b.Bearing, Significant(b.Minor))
	if a := rec.StudyArea; a != nil {
		fmt.Fprintf(w, "Study area: %s km2; at its edge %s.\n", Significant(a.AreaKM2), a.Text)
	}
	if z := rec.Zones; z != nil {
		fmt.Fprintf(w, "Zones: %d, of which %d without numbers because they hold few events, and %d so that those cannot be worked out.\n", z.Zones, rec.Guard.Zones, rec.Guard.ZonesComplement)
	}
	g := rec.Guard
	if n := g.RegionParts + g.RegionHoles + g.BandParts + g.BandHoles + g.Peaks; n > 0 {
		fmt.Fprintf(w, "Withheld because they rest on fewer than %g events: %d parts, holes or peaks.\n", g.MinEvents, n)
	}
	if n := len(g.ClosePairs); n > 0 {
		fmt.Fprintf(w, "%s by fewer than %g events: do not publish both, or choose --content and --bands further apart (the record names them).\n", pairs(n), g.MinEvents)
	}
}

func pairs(n int) string {
	if n == 1 {
		return "One pair of a region and a contour differs"
	}
	return fmt.Sprintf("%d pairs of a region and a contour differ", n)
}

func parts(n int) string {
	if n == 1 {
		return "one area"
	}
	return fmt.Sprintf("%d areas", n)
}

// Place prints a position for people.
func Place(p spatial.LonLat, method string) string {
	if method == "plane" {
		return fmt.Sprintf("x %s, y %s", Significant(p.Lon), Significant(p.Lat))
	}
	ns, ew := "N", "E"
	if p.Lat < 0 {
		ns = "S"
	}
	if p.Lon < 0 {
		ew = "W"
	}
	return fmt.Sprintf("%.4f%s %.4f%s", math.Abs(p.Lat), ns, math.Abs(p.Lon), ew)
}

// Significant prints three significant digits without an exponent.
func Significant(v float64) string {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return fmt.Sprint(v)
	}
	digits := 2 - int(math.Floor(math.Log10(math.Abs(v))))
	if digits <= 0 {
		unit := math.Pow(10, float64(-digits))
		return progress.Count(int64(math.Round(v/unit) * unit))
	}
	return fmt.Sprintf("%.*f", digits, v)
}
