package cql2_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
	"time"

	"drumlin/io/cql2"
	"drumlin/io/events"
)

var fields = []events.Field{
	{Name: "n", Numeric: true}, {Name: "m", Numeric: true}, {Name: "kind", Class: events.Text}, {Name: "other kind", Class: events.Text},
	{Name: "at", Class: events.Instant}, {Name: "day", Class: events.WallClock}, {Name: "open", Numeric: true, Class: events.Truth},
	{Name: "said", Class: events.Text}, {Name: "blob"},
}

// row is one row of the test table: a nil is absent.
type row []any

const hour = 3600e6

var rows = []row{
	// n, m, kind, other kind, at (hours after 1970 UTC), day, open, said
	{1.0, 2.0, "fire", "fire", 0.0, 0.0, 1.0, "1970-01-01T00:00:00Z"},
	{2.0, 2.0, "O'Hara", "fire", 24.0, 24.0, 0.0, "1970-01-02"},
	{nil, 2.0, nil, "x", nil, nil, nil, nil},
	{math.NaN(), -2.0, "", "fire", 36.5, 48.0, 1.0, "soon"},
	{-3.5, 1e20, "fire brigade", nil, -1.0, -24.0, 0.0, "1970-01-01 01:00"},
}

func batch() events.Batch {
	b := events.Batch{Columns: make([][]float64, len(fields)), Words: make([][]string, len(fields))}
	for _, r := range rows {
		for k, v := range r {
			switch v := v.(type) {
			case nil:
				b.Columns[k] = append(b.Columns[k], events.Null)
			case string:
				b.Columns[k] = append(b.Columns[k], float64(len(b.Words[k])))
				b.Words[k] = append(b.Words[k], v)
			case float64:
				if fields[k].Class == events.Instant || fields[k].Class == events.WallClock {
					v *= hour
				}
				b.Columns[k] = append(b.Columns[k], v)
			}
		}
	}
	return b
}

// eval returns a letter a row: t, f or u.
func eval(t *testing.T, text string, zone *time.Location) string {
	t.Helper()
	f, err := cql2.Parse(text)
	if err != nil {
		t.Fatalf("%s: %v", text, err)
	}
	p, err := f.Bind(fields, zone)
	if err != nil {
		t.Fatalf("%s: %v", text, err)
	}
	all := batch()
	var b events.Batch
	for _, name := range append([]string{"n"}, p.Columns()...) { // one column before the filter's
		for k, field := range fields {
			if field.Name == name {
				b.Columns = append(b.Columns, all.Columns[k])
				b.Words = append(b.Words, all.Words[k])
			}
		}
	}
	var s cql2.Scratch
	var out strings.Builder
	for _, v := range p.Eval(b, 1, &s) {
		out.WriteByte("fut"[v])
	}
	return out.String()
}

func TestEval(t *testing.T) {
	east := time.FixedZone("east", 3600)
	for text, want := range map[string]string{
		"n = 2":                  "ftuuf",
		"2 = n":                  "ftuuf",
		"n <> 2":                 "tfuut",
		"n < 2":                  "tfuut",
		"2 > n":                  "tfuut",
		"n <= 2":                 "ttuut",
		"n >= -3.5e0":            "ttuut",
		"n > +1":                 "ftuuf",
		"NOT n > 1":              "tfuut",
		"not not n > 1":          "ftuuf",
		"n < m":                  "tfuut",
		"n IS NULL":              "fftff",
		"n is not null":          "ttftt",
		"n BETWEEN 1 AND 1.5":    "tfuuf",
		"n NOT BETWEEN 1 AND 2":  "ffuut",
		"n IN (1, -3.5)":         "tfuut",
		"n NOT IN (1)":           "ftuut",
		"kind = 'fire'":          "tfuff",
		"kind = 'O''Hara'":       "ftuff",
		"kind <> ''":             "ttuft",
		"kind > 'fire'":          "ffuft",
		"kind LIKE 'fire%'":      "tfuft",
		"kind LIKE '_ire'":       "tfuff",
		"kind NOT LIKE '%r%'":    "ffutf",
		`kind LIKE '%\%'`:        "ffuff",
		"kind IN ('fire','')":    "tfutf",
		`kind = "other kind"`:    "tfufu",
		"kind IS NULL":           "fftff",
		"open = TRUE":            "tfutf",
		"open <> true":           "ftuft",
		"n = 1 OR open = TRUE":   "tfutf",
		"n = 1 AND open = TRUE":  "tfuuf",
		"n = 7 AND kind = 'x'":   "ffuff",
		"n = 2 OR n = 1 AND m=9": "ftuuf",
		"(n=2 OR n=1) AND m=9":   "fffff",
		"TRUE":                   "ttttt",
		"FALSE OR n = 1":         "tfuuf",
		"at >= TIMESTAMP('1970-01-02T00:00:00Z')":      "ftutf",
		"at >= TIMESTAMP('1970-01-02T01:00:00+01:00')": "ftutf",
		"at < DATE('1970-01-01')":                      "ffuft",
		"day = DATE('1970-01-02')":                     "ftuff",
		"at IN (DATE('1970-01-02'))":                   "ftuff",
		"said <= TIMESTAMP('1970-01-01T00:30:00Z')":    "tfuuf",
		"said IN (DATE('1970-01-02'))":                 "ftuuf",
	} {
		if got := eval(t, text, time.UTC); got != want {
			t.Errorf("%s: %s, want %s", text, got, want)
		}
	}
	for text, want := range map[string]string{
		"at < DATE('1970-01-01')":                   "ffuff", // midnight east is 23:00 UTC the day before
		"at = TIMESTAMP('1970-01-01T00:00')":        "ffuft",
		"day = TIMESTAMP('1970-01-01T23:00:00Z')":   "ftuff",
		"said = TIMESTAMP('1970-01-01T00:00:00Z')":  "tfuut",
		"said < TIMESTAMP('1970-01-01T00:00:00Z')":  "ffuuf",
		"said <= TIMESTAMP('1970-01-01T00:00:00Z')": "tfuut",
	} {
		if got := eval(t, text, east); got != want {
			t.Errorf("%s east: %s, want %s", text, got, want)
		}
	}
}

func TestSyntax(t *testing.T) {
	for text, c := range map[string]struct {
		at   int
		says string
	}{
		"":                               {1, "empty"},
		"n":                              {2, "comparison"},
		"n =":                            {4, "the end"},
		"n = 1 2":                        {7, "AND, OR"},
		"n == 1":                         {4, "= where a column"},
		"n = 'a":                         {5, "not closed"},
		"(n = 1":                         {7, ")"},
		"n = 1)":                         {6, "AND, OR"},
		"n IN 1":                         {6, "("},
		"n IN (a)":                       {7, "quotes"},
		"n BETWEEN 1 OR 2":               {13, "AND"},
		"n NOT = 1":                      {7, "BETWEEN, IN or LIKE"},
		"kind LIKE 3":                    {11, "pattern"},
		"é = 1 AND ü ! 1":                {13, "no part of a filter"},
		"at > DATE('2024-2-1')":          {11, "DATE('2025-03-01')"},
		"at > DATE('2023-02-29')":        {11, "cannot be read"},
		"at > TIMESTAMP('2023-02-28')":   {16, "TIMESTAMP("},
		"n = 1.2.3":                      {5, "no number"},
		"abs(n) = 1":                     {1, "functions"},
		"n IS 1":                         {6, "NULL"},
		"AND n = 1":                      {1, "a column or a value"},
		"n = 1; DROP":                    {6, "no part"},
		strings.Repeat("(", 200) + "n=1": {102, "deeply"},
	} {
		_, err := cql2.Parse(text)
		var s *cql2.SyntaxError
		if !errors.As(err, &s) || s.At != c.at || !strings.Contains(s.What, c.says) {
			t.Errorf("%q: %v, want character %d and %q", text, err, c.at, c.says)
		}
	}
}

func TestBindFaults(t *testing.T) {
	for text, c := range map[string]struct {
		kind error
		says string
	}{
		"nn = 1":                 {events.ErrSetting, `close to it: "n"`},
		"blob = 'x'":             {events.ErrUnsupported, "not read"},
		"n = 'x'":                {events.ErrSetting, "column n holds a number"},
		"kind = 1":               {events.ErrSetting, "at character 8"},
		"kind IN (1)":            {events.ErrSetting, "IN"},
		"open < TRUE":            {events.ErrSetting, "compared"},
		"1 = 1":                  {events.ErrSetting, "two values"},
		"n LIKE 'x'":             {events.ErrSetting, "LIKE"},
		"at = day":               {events.ErrSetting, "without a zone"},
		"n = DATE('2024-01-01')": {events.ErrSetting, "a time"},
	} {
		f, err := cql2.Parse(text)
		if err == nil {
			_, err = f.Bind(fields, time.UTC)
		}
		if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", text, err)
		}
	}
}

// TestPrune: whatever the statistics say, no part is left out that has a row
// which passes, and none is taken whole that has one which does not.
func TestPrune(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	num := func() string { return strconv.Itoa(r.IntN(7) - 3) }
	var expr func(depth int) string
	expr = func(depth int) string {
		col := []string{"n", "m"}[r.IntN(2)]
		switch r.IntN(9 + 4*depth) {
		case 0:
			return col + " IS NULL"
		case 1:
			return col + " IN (" + num() + "," + num() + ")"
		case 2:
			return col + " BETWEEN " + num() + " AND " + num()
		case 3:
			return "n < m"
		case 4:
			return "kind = '" + num() + "'"
		case 5, 6, 7, 8:
			return col + []string{"=", "<>", "<", "<=", ">", ">="}[r.IntN(6)] + num()
		case 9, 10:
			return "NOT (" + expr(depth-1) + ")"
		case 11:
			return "(" + expr(depth-1) + ") OR (" + expr(depth-1) + ")"
		}
		return "(" + expr(depth-1) + ") AND (" + expr(depth-1) + ")"
	}
	none, all := 0, 0
	for range 20000 {
		text := expr(3)
		f, err := cql2.Parse(text)
		if err != nil {
			t.Fatal(text, err)
		}
		p, err := f.Bind(fields, time.UTC)
		if err != nil {
			t.Fatal(text, err)
		}
		data := map[string][]float64{}
		stats := map[string]events.Stat{}
		n := 1 + r.IntN(6)
		word := num()
		for _, name := range []string{"n", "m", "kind"} {
			st := events.Stat{Lo: math.Inf(1), Hi: math.Inf(-1)}
			base, span := r.IntN(5)-2, 1+r.IntN(4)
			for range n {
				v := float64(base + r.IntN(span))
				switch k := r.IntN(8); {
				case k == 0:
					v = events.Null
					st.Nulls++
				case k == 1 && name != "kind":
					v = math.NaN() // not in the statistics, nor among the nulls
				case name == "kind":
					v = 0
					st.Words = []string{word}
				default:
					st.Lo, st.Hi = min(st.Lo, v), max(st.Hi, v)
				}
				data[name] = append(data[name], v)
			}
			if st.Lo > st.Hi && st.Nulls < int64(n) && name != "kind" || r.IntN(6) == 0 || name == "kind" && st.Words == nil {
				continue // nothing stated
			}
			if r.IntN(4) == 0 {
				st.Nulls = -1
			}
			stats[name] = st
		}
		var b events.Batch
		for _, name := range p.Columns() {
			b.Columns = append(b.Columns, data[name])
			if name == "kind" {
				b.Words = append(b.Words, []string{word})
			} else {
				b.Words = append(b.Words, nil)
			}
		}
		if len(b.Columns) == 0 {
			continue
		}
		stat := func(c string) (events.Stat, bool) { st, ok := stats[c]; return st, ok }
		var s cql2.Scratch
		some, each := false, true
		for _, v := range p.Eval(b, 0, &s) {
			some = some || v == cql2.True
			each = each && v == cql2.True
		}
		if p.None(stat) {
			if none++; some {
				t.Fatalf("%s: left out, stats %+v, data %v", text, stats, data)
			}
		}
		if p.All(stat) {
			if all++; !each {
				t.Fatalf("%s: taken whole, stats %+v, data %v", text, stats, data)
			}
		}
	}
	if none < 1000 || all < 10 {
		t.Errorf("only %d parts left out and %d taken whole: the test tells little", none, all)
	}
}

// FuzzParse: any text is read or refused at a place within it, and what is read
// is read again from its own form.
func FuzzParse(f *testing.F) {
	for _, s := range []string{
		"kind = 'fire' AND n >= 2", "NOT (a IS NULL OR b NOT IN (1,'x',TRUE))", `"odd name" LIKE '%a\_%'`,
		"at BETWEEN DATE('2024-01-01') AND TIMESTAMP('2024-02-01T00:00:00+02:00')", "n = -1.5e-3", "é<>ü", "((((n=1))))",
	} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		p, err := cql2.Parse(text)
		if err != nil {
			var s *cql2.SyntaxError
			if !errors.As(err, &s) || s.At < 1 || s.At > len(text)+1 {
				t.Fatalf("%q: %v", text, err)
			}
			return
		}
		again, err := cql2.Parse(p.String())
		if err != nil {
			if strings.Contains(err.Error(), "deeply") || strings.Contains(err.Error(), "longer") {
				return // its own form has more brackets
			}
			t.Fatalf("%q written as %q: %v", text, p, err)
		}
		if again.String() != p.String() {
			t.Fatalf("%q: %q and then %q", text, p, again)
		}
		if prog, err := p.Bind(fields, time.UTC); err == nil {
			all := batch()
			var b events.Batch
			for _, name := range prog.Columns() {
				for k, field := range fields {
					if field.Name == name {
						b.Columns, b.Words = append(b.Columns, all.Columns[k]), append(b.Words, all.Words[k])
					}
				}
			}
			var s cql2.Scratch
			prog.Eval(b, 0, &s)
			prog.None(func(string) (events.Stat, bool) { return events.Stat{}, false })
		}
	})
}
