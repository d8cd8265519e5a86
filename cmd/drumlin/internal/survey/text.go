package survey

import (
	"bytes"
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"

	"drumlin/io/events"
)

const mostColumns = 60 // shown in the text

// WriteText writes the report as tables for people.
func (r *Report) WriteText(w io.Writer) error {
	var b bytes.Buffer
	t := tabwriter.NewWriter(&b, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "%s rows in %d %s\n", count(r.Rows), len(r.Inputs), plural(len(r.Inputs), "input", "inputs"))
	for i, in := range r.Inputs {
		if i == 10 && len(r.Inputs) > 11 {
			fmt.Fprintf(t, "  ... and %d more\n", len(r.Inputs)-i)
			break
		}
		fmt.Fprintf(t, "  %s\t%s\t%s rows\t%d columns\t%s\n", in.Path, in.Format, count(in.Rows), in.Columns, in.CRS)
	}
	fmt.Fprintf(t, "\nColumn\tType\tHolds\tNulls\tFrom\tTo\n")
	for i, c := range r.Columns {
		if i == mostColumns {
			fmt.Fprintf(t, "  ... and %d more; --json lists them all\n", len(r.Columns)-i)
			break
		}
		from, to := c.From, c.To
		if c.Least != nil {
			from, to = short(*c.Least), short(*c.Greatest)
		}
		if c.Holds == "text" || c.Holds == "times as text" {
			from = fmt.Sprintf("%d different", c.Distinct)
			if c.More {
				from = fmt.Sprintf("more than %d different", c.Distinct)
			}
		}
		notes := []string{}
		for _, n := range []struct {
			rows int64
			what string
		}{{c.NotAValue, "no number"}, {c.NaN, "not-a-number"}, {c.Infinite, "infinite"}} {
			if n.rows > 0 {
				notes = append(notes, count(n.rows)+" "+n.what)
			}
		}
		if c.Note != "" {
			notes = append(notes, c.Note)
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\n", c.Name, c.Type, c.Holds, count(c.Nulls), from, to, strings.Join(notes, ", "))
	}
	if c := r.Coordinates; c != nil {
		c.write(t)
	}
	r.Map.write(t)
	if len(r.Findings) > 0 {
		fmt.Fprintf(t, "\nWhat stands out\n")
		for _, f := range r.Findings {
			fmt.Fprintf(t, "- %s\n", f)
		}
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for line := range strings.Lines(b.String()) { // cells that are empty leave blanks
		if _, err := io.WriteString(w, strings.TrimRight(line, " \n")+"\n"); err != nil {
			return err
		}
	}
	return nil
}

func (c *Coordinates) write(t io.Writer) {
	about := ""
	if c.Estimated {
		about = fmt.Sprintf(" (estimated from one position in %d)", c.OneIn)
	}
	crs := c.CRS
	if crs == "" {
		crs = "not known"
	}
	fmt.Fprintf(t, "\nCoordinates %s and %s, CRS %s; the numbers look like %s\n", c.X, c.Y, crs, strings.Join(c.CRSGuesses, ", or "))
	box := func(name string, b []float64) {
		if len(b) == 4 {
			fmt.Fprintf(t, "  %s\tx %s to %s\ty %s to %s\n", name, short(b[0]), short(b[2]), short(b[1]), short(b[3]))
		}
	}
	box("all", c.Extent)
	box("middle 95 %", c.Middle95)
	fmt.Fprintf(t, "  different positions\t%s of %s rows%s\n", count(c.Distinct), count(c.Rows), about)
	fmt.Fprintf(t, "  tied pairs per event\t%.3g (cross-validation needs less than %.3g)\n", c.TieRatio, c.TieLimit)
	if len(c.Stacks) > 0 {
		fmt.Fprintf(t, "  tallest stacks\t")
		for i, s := range c.Stacks {
			if i > 0 {
				fmt.Fprint(t, ", ")
			}
			fmt.Fprint(t, count(s.Rows))
			if s.X != nil {
				fmt.Fprintf(t, " at %s %s", short(*s.X), short(*s.Y))
			}
		}
		if c.Estimated {
			fmt.Fprintf(t, " among the positions held; none is taller than %s", count(c.NoTaller))
		}
		fmt.Fprintln(t)
	}
	if len(c.Decimals) > 0 {
		fmt.Fprintf(t, "  decimals\t")
		for i, d := range c.Decimals {
			if i > 0 {
				fmt.Fprint(t, ", ")
			}
			digits := strconv.Itoa(d.Digits)
			if d.Digits == mostDigits {
				digits += " or more"
			}
			fmt.Fprintf(t, "%s: %s", digits, count(d.Rows))
		}
		fmt.Fprintln(t)
	}
	fmt.Fprintf(t, "  at 0, 0\t%s rows\n", count(c.NullIsland))
	for _, s := range c.Sentinels {
		fmt.Fprintf(t, "  with %g\t%s rows\n", s.Value, count(s.Rows))
	}
	fmt.Fprintf(t, "  far outside the rest\t%s rows\n", count(c.Outliers))
}

func (o *Outlook) write(t io.Writer) {
	fmt.Fprintf(t, "\nWhat map would do\n")
	if o.Refusal != "" {
		fmt.Fprintf(t, "  stop\t%s\n", o.Refusal)
	}
	if o.Account == nil {
		return
	}
	fmt.Fprintf(t, "  read\t%s rows\n  use\t%s rows\n", count(o.Account.Read), count(o.Account.Used-o.OutsideExtent))
	for _, reason := range events.Reasons() {
		if n := o.Account.SetAside[reason]; n > 0 {
			fmt.Fprintf(t, "  set aside\t%s rows\t%s\n", count(n), reason)
		}
	}
	if o.OutsideExtent > 0 {
		fmt.Fprintf(t, "  set aside\t%s rows\tfar outside the rest\n", count(o.OutsideExtent))
	}
	if o.Plane != "" {
		fmt.Fprintf(t, "  plane\t%s\n", o.Plane)
	}
}

func short(v float64) string { return strconv.FormatFloat(v, 'g', 10, 64) }

func plural(n int, one, more string) string {
	if n == 1 {
		return one
	}
	return more
}

// count writes a number with a comma every three digits.
func count(n int64) string {
	s := strconv.FormatInt(n, 10)
	for i := len(s) - 3; i > 0 && s[i-1] != '-'; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}
