package pipeline

import (
	"fmt"
	"io"
	"strings"
	"text/tabwriter"

	"drumlin/cmd/drumlin/internal/progress"
)

// Print writes the table for people.
func (t *Table) Print(w io.Writer) {
	fmt.Fprintf(w, "%s events", progress.Count(t.Events))
	if t.EffectiveN < 0.99*float64(t.Events) {
		fmt.Fprintf(w, " (their weights are worth %s equal ones)", Significant(t.EffectiveN))
	}
	fmt.Fprintf(w, " on the plane %s.\n", t.Plane)
	if t.Ties.PerEvent > 0.01 {
		where := "lie"
		if t.Ties.Axis > 0 {
			where = "are neighbours and lie, across " + [...]string{"", "x", "y"}[t.Ties.Axis] + ","
		}
		fmt.Fprintf(w, "About %s pairs of events %s within %s m of each other: %s per event; above %s least-squares cross-validation has no minimum.\n",
			Significant(t.Ties.Pairs), where, Significant(t.Ties.Scale), Significant(t.Ties.PerEvent), Significant(t.Ties.Limit))
	}
	fmt.Fprintln(w)
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(tw, "selector\tshape\th11 m2\th12 m2\th22 m2\tmajor m\tminor m\tbearing\tcriterion\texpected error\ttime\tstatus\t")
	for _, r := range t.Rows {
		if r.Matrix == nil {
			fmt.Fprintf(tw, "%s\t%s\t-\t-\t-\t-\t-\t-\t-\t-\t%.3f s\t%s\t\n", r.Asked, r.Shape, r.Seconds, r.Status)
			continue
		}
		crit := "-"
		if r.Criterion != nil {
			crit = fmt.Sprintf("%.4g", *r.Criterion)
		}
		fmt.Fprintf(tw, "%s\t%s\t%.5g\t%.5g\t%.5g\t%s\t%s\t%.0f\t%s\t%.2f\t%.3f s\t%s\t\n",
			r.Asked, r.Shape, r.Matrix[0], r.Matrix[1], r.Matrix[3], Significant(r.Major), Significant(r.Minor), r.Bearing, crit, r.Relative, r.Seconds, r.Status)
	}
	_ = tw.Flush() // to a writer whose errors the caller sees
	fmt.Fprintln(w, "\nExpected error: that of the plug-in functionals for each matrix, over the least of the table; a yardstick, not a verdict.")
	if s := t.Stability; s != nil {
		fmt.Fprintf(w, "Stability of %s (%d bootstrap replicates, seed %d), 5 to 95 %%: long scale %s to %s m, short scale %s to %s m, bearing %.0f to %.0f degrees.\n",
			s.Selector, s.Replicates, s.Seed, Significant(s.Major[0]), Significant(s.Major[2]), Significant(s.Minor[0]), Significant(s.Minor[2]), s.Bearing[0], s.Bearing[2])
	}
	for _, r := range t.Rows {
		for _, n := range r.Notes {
			fmt.Fprintf(w, "%s: %s.\n", r.Asked, strings.TrimSuffix(n, "."))
		}
	}
	for _, n := range t.Warnings {
		fmt.Fprintf(w, "Warning: %s.\n", n)
	}
}
