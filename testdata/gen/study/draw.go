package main

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"strconv"
	"strings"
)

// shown are the selectors in the picture, with their colours and marks.
var shown = []struct{ name, colour, mark string }{
	{"auto", "#b3261e", "circle"},
	{"plug-in", "#1f5fa8", "square"},
	{"lscv", "#8a8a8a", "cross"},
	{"scv", "#3c8d5a", "triangle"},
}

// draw makes a picture: a row of panels, one per n, a line per target, the
// ratio on a logarithmic axis from 0.9 to 4.
func draw(out string, tables []string) error {
	const (
		left, top, line, panel, gap = 60, 70, 24, 260, 40
	)
	type cell struct{ mean, se float64 }
	var ns []string
	var targets []string
	values := map[string]cell{}
	for _, name := range tables {
		f, err := os.Open(name)
		if err != nil {
			return err
		}
		r := csv.NewReader(f)
		r.Comment = '#'
		rows, err := r.ReadAll()
		f.Close()
		if err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
		for _, row := range rows[1:] {
			if !contains(ns, row[1]) {
				ns = append(ns, row[1])
			}
			if !contains(targets, row[0]) {
				targets = append(targets, row[0])
			}
			var c cell
			if c.mean, err = strconv.ParseFloat(row[5], 64); err != nil {
				return fmt.Errorf("%s: %w", name, err)
			}
			if c.se, err = strconv.ParseFloat(row[6], 64); err != nil {
				return fmt.Errorf("%s: %w", name, err)
			}
			values[row[1]+"/"+row[0]+"/"+row[2]] = c
		}
	}
	sortNumbers(ns)
	width, height := left+len(ns)*(panel+gap), top+line*len(targets)+50
	var b strings.Builder
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" width="%d" height="%d" viewBox="0 0 %d %d" font-family="sans-serif" font-size="12">`+"\n", width, height, width, height)
	fmt.Fprintf(&b, `<rect width="%d" height="%d" fill="#fff"/>`+"\n", width, height)
	for i, s := range shown {
		x := left + 110*i
		mark(&b, s.mark, s.colour, float64(x), 20)
		fmt.Fprintf(&b, `<text x="%d" y="24">%s</text>`+"\n", x+10, s.name)
	}
	for p, n := range ns {
		x0 := float64(left + p*(panel+gap))
		at := func(v float64) float64 {
			return x0 + panel*math.Log(math.Min(math.Max(v, 0.9), 4)/0.9)/math.Log(4/0.9)
		}
		fmt.Fprintf(&b, `<text x="%.1f" y="50" font-weight="bold">n = %s</text>`+"\n", x0, n)
		for _, v := range []float64{1, 1.2, 1.5, 2, 3, 4} {
			fmt.Fprintf(&b, `<line x1="%.1f" x2="%.1f" y1="%d" y2="%d" stroke="#ddd"/><text x="%.1f" y="%d" text-anchor="middle" fill="#555">%g</text>`+"\n", at(v), at(v), top-8, height-40, at(v), height-24, v)
		}
		for i, t := range targets {
			y := float64(top + line*i)
			if p == 0 {
				fmt.Fprintf(&b, `<text x="%d" y="%.1f" text-anchor="end">%s</text>`+"\n", left-12, y+4, t)
			}
			for k := len(shown) - 1; k >= 0; k-- {
				s := shown[k]
				c, ok := values[n+"/"+t+"/"+s.name]
				if !ok || c.mean == 0 {
					continue
				}
				fmt.Fprintf(&b, `<line x1="%.1f" x2="%.1f" y1="%.1f" y2="%.1f" stroke="%s"/>`+"\n", at(c.mean-c.se), at(c.mean+c.se), y, y, s.colour)
				mark(&b, s.mark, s.colour, at(c.mean), y)
			}
		}
	}
	fmt.Fprintf(&b, `<text x="%d" y="%d" fill="#555">mean integrated squared error over the least possible (logarithmic; 4 and more at the edge); bars: one standard error</text>`+"\n</svg>\n", left, height-6)
	return os.WriteFile(out, []byte(b.String()), 0o644)
}

func mark(b *strings.Builder, kind, colour string, x, y float64) {
	switch kind {
	case "circle":
		fmt.Fprintf(b, `<circle cx="%.1f" cy="%.1f" r="5" fill="%s"/>`+"\n", x, y, colour)
	case "square":
		fmt.Fprintf(b, `<rect x="%.1f" y="%.1f" width="8" height="8" fill="%s"/>`+"\n", x-4, y-4, colour)
	case "triangle":
		fmt.Fprintf(b, `<path d="M%.1f %.1fl5 9h-10z" fill="%s"/>`+"\n", x, y-5, colour)
	default:
		fmt.Fprintf(b, `<path d="M%.1f %.1fl8 8m0-8l-8 8" stroke="%s" stroke-width="2"/>`+"\n", x-4, y-4, colour)
	}
}

func contains(list []string, v string) bool {
	for _, s := range list {
		if s == v {
			return true
		}
	}
	return false
}

// sortNumbers orders numbers given as text.
func sortNumbers(v []string) {
	for i := range v {
		for j := i; j > 0 && (len(v[j]) < len(v[j-1]) || len(v[j]) == len(v[j-1]) && v[j] < v[j-1]); j-- {
			v[j], v[j-1] = v[j-1], v[j]
		}
	}
}
