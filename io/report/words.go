package report

import (
	"fmt"
	"html/template"
	"math"
	"strings"

	"drumlin/spatial"
)

// words says what the map shows before the map does: short sentences, numbers
// with their units, each tied to the file it comes from.
func words(p *Page, u areaUnit) []template.HTML {
	var out []template.HTML
	add := func(parts ...any) {
		var b strings.Builder
		for _, v := range parts {
			if s, ok := v.(template.HTML); ok {
				b.WriteString(string(s))
			} else {
				b.WriteString(template.HTMLEscapeString(fmt.Sprint(v)))
			}
		}
		out = append(out, template.HTML(b.String()))
	}
	rec := p.Record
	add(data("run/rows/used", exact(float64(rec.Rows.Used)), count(float64(rec.Rows.Used))), " recorded events are on this map. ", setAside(p), " ", periodText(p))
	for i, r := range p.Release.Regions() {
		add(regionWords(p, i, r)...)
	}
	if peaks := p.Release.Peaks(); len(peaks) > 0 {
		add(peakWords(p, peaks[0], u)...)
		add(errorWords(peaks)...)
	}
	b := rec.Bandwidth
	add("Each event is spread over its surroundings: ", data("run/bandwidth/major_m", exact(b.Major), lengthText(b.Major)), " (one scale) along bearing ",
		data("run/bandwidth/bearing_deg", exact(b.Bearing), fmt.Sprintf("%.0f°", b.Bearing)), " and ", data("run/bandwidth/minor_m", exact(b.Minor), lengthText(b.Minor)),
		" across; detail finer than that is not shown. ", bandwidthOrigin(b.Method))
	if s := alternativeWords(p); s != "" {
		add(s)
	}
	if n, text := withheldWords(p.Release.Withheld()); n > 0 {
		add(text)
	}
	return out
}

func setAside(p *Page) template.HTML {
	r := p.Record.Rows
	if r.Read == r.Used {
		return "No row was set aside."
	}
	var parts []string
	for i, s := range r.SetAside {
		parts = append(parts, string(data(fmt.Sprintf("run/rows/set_aside/%d/rows", i), exact(float64(s.Rows)), count(float64(s.Rows))))+" "+string(foreign(strings.ReplaceAll(s.Reason, "-", " "))))
	}
	if r.OutsideExtent > 0 {
		parts = append(parts, string(data("run/rows/outside_extent", exact(float64(r.OutsideExtent)), count(float64(r.OutsideExtent))))+" far from all others")
	}
	return "Of " + data("run/rows/read", exact(float64(r.Read)), count(float64(r.Read))) + " rows read, " +
		template.HTML(count(float64(r.Read-r.Used))) + " were set aside: " + template.HTML(strings.Join(parts, ", ")) + "."
}

func periodText(p *Page) template.HTML {
	if p.Period == nil {
		return "When they happened is not known to this map."
	}
	s := "They happened from " + foreign(p.Period.From) + template.HTML(p.Period.to()) + foreign(p.Period.Until)
	if p.Period.Zone != "" {
		s += " (" + foreign(p.Period.Zone) + ")"
	}
	return s + "."
}

func regionID(c float64) string { return "region-" + perCent(c) }

func partsText(n int) string {
	if n == 1 {
		return "one area"
	}
	return fmt.Sprintf("%d areas", n)
}

func regionWords(p *Page, i int, r spatial.Region) []any {
	id := regionID(r.Content)
	parts := []any{data(id+"/events", exact(math.Round(r.Events.Estimate)), count(r.Events.Estimate)), " of the recorded events (",
		data(id+"/event_share", same(r.EventShare), shareText(r.EventShare)), ") lie within ", partsText(len(r.Plane)), " of together ",
		data(id+"/area_km2", same(r.AreaKM2), areaText(r.AreaKM2)), ": the ", template.HTML("<b>" + contentText(r.Content) + " region</b>")}
	widest := p.Release.Regions()[len(p.Release.Regions())-1]
	if r.AreaKM2 < widest.AreaKM2 {
		parts = append(parts, ", ", significant(100*r.AreaKM2/widest.AreaKM2, 2), nb+"% of the ", contentText(widest.Content), " region’s ground")
	}
	return append(parts, ".")
}

func peakWords(p *Page, k spatial.Peak, u areaUnit) []any {
	id := "peak-1"
	step := p.Release.Surface().Step[0]
	parts := []any{"Intensity is highest at ", template.HTML("<b>peak 1</b>"), " (", placeText(k.Position, p.placeless(), step), "): ",
		data(id+"/intensity_per_km2", same(k.IntensityPerKM2), significant(k.IntensityPerKM2*u.km2, 3)), " " + p.counted() + " per " + u.name + ", give or take ",
		data(id+"/standard_error_per_km2", same(k.StandardErrorPerKM2), significant(k.StandardErrorPerKM2*u.km2, 2)), " (one standard error). "}
	if k.SmoothingBiasPerKM2 < 0 {
		return append(parts, "Smoothing lowers it by about ", data(id+"/smoothing_bias_per_km2", same(k.SmoothingBiasPerKM2), significant(-k.SmoothingBiasPerKM2*u.km2, 2)),
			"; without that it would read ", data(id+"/debiased_per_km2", same(k.DebiasedPerKM2), significant(k.DebiasedPerKM2*u.km2, 3)), ".")
	}
	if math.IsNaN(k.SmoothingBiasPerKM2) {
		return append(parts, "So near the edge of the study area it is not known how much smoothing changes it.")
	}
	return append(parts, "Smoothing does not lower it.")
}

// errorWords says how sure the peaks are, from the surest to the least sure.
func errorWords(peaks []spatial.Peak) []any {
	lo, hi, most := math.Inf(1), 0.0, 0.0
	for _, k := range peaks {
		e := k.StandardErrorPerKM2 / k.IntensityPerKM2
		lo, hi = min(lo, e), max(hi, e)
		if k.SmoothingBiasPerKM2 < 0 {
			most = max(most, -k.SmoothingBiasPerKM2/k.IntensityPerKM2)
		}
	}
	parts := []any{}
	if len(peaks) == 1 {
		parts = append(parts, "It is the only peak shown; one standard error is ", significant(100*lo, 2), nb+"% of it")
	} else {
		parts = append(parts, fmt.Sprintf("%d peaks are shown; one standard error is ", len(peaks)), significant(100*lo, 2), nb+"% of the surest and ", significant(100*hi, 2), nb+"% of the least sure")
	}
	if most > 0 {
		parts = append(parts, ". Smoothing lowers peaks by up to ", significant(100*most, 2), nb+"%, more where they are sharp")
	}
	return append(parts, ".")
}

func bandwidthOrigin(method string) template.HTML {
	switch method {
	case "auto", "plug-in":
		return "That amount was chosen from the events to make the estimated error least."
	case "normal-reference":
		return "That amount is the reference for a single bell-shaped cluster; with several clusters it smooths too much."
	case "fixed":
		return "That amount was given, not chosen from the events."
	}
	return "That amount was chosen from the events by " + foreign(method) + "."
}

// alternativeWords says how the smallest region changes with the bandwidth.
func alternativeWords(p *Page) string {
	r := p.Release.Regions()
	if len(r) == 0 {
		return ""
	}
	var parts []string
	for _, a := range p.Alternatives {
		for _, q := range a.Regions {
			if q.Content == r[0].Content {
				parts = append(parts, fmt.Sprintf("with %s it would be %s", smoothingText(a.Factor), areaText(q.AreaKM2)))
			}
		}
	}
	if len(parts) == 0 {
		return ""
	}
	return fmt.Sprintf("The %s region is %s; ", contentText(r[0].Content), areaText(r[0].AreaKM2)) + strings.Join(parts, ", ") + "."
}

// smoothingText says in words what a factor of H does.
func smoothingText(c float64) string {
	how := "more smoothing"
	if c < 1 {
		how = "less smoothing"
	}
	return how + " (" + factorText(c) + ")"
}

// factorText names c times H.
func factorText(c float64) string {
	switch {
	case c == 1:
		return "H"
	case c < 1 && 1/c == math.Round(1/c):
		return fmt.Sprintf("H/%.0f", 1/c)
	}
	return level(c) + nb + "H"
}

func withheldWords(w spatial.Withheld) (int, string) {
	n := w.RegionParts + w.RegionHoles + w.BandParts + w.BandHoles + w.Peaks
	text := fmt.Sprintf("Kept back, because they rest on fewer than %g events: %d parts of regions, %d of bands, %d holes and %d peaks.", w.MinEvents, w.RegionParts, w.BandParts, w.RegionHoles+w.BandHoles, w.Peaks)
	for _, c := range w.Regions {
		n++
		text += " The " + contentText(c) + " region is not shown at all."
	}
	return n, text
}
