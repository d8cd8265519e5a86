package report

import (
	"bytes"
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"io"
	"math"
	"path"
	"slices"
	"strings"
	"time"

	"drumlin/io/record"
	"drumlin/spatial"
)

//go:embed assets/page.gohtml
var pageText string

//go:embed assets/style.css
var styleText string

//go:embed assets/script.js
var scriptText string

var pageTemplate = template.Must(template.New("page").Parse(pageText))

const (
	firstPeaks = 10  // rows of the table that are open at once
	mostPeaks  = 100 // rows at all; the file has every peak
	smallWidth = 300 // pixels of the maps side by side

	mostLabelled = 12 // bands that each have a label in the legend
)

// WriteHTML writes report.html. Equal pages give equal bytes. Errors:
// ErrIncomplete, and those of w.
func WriteHTML(w io.Writer, p Page) error {
	if err := p.validate(); err != nil {
		return err
	}
	var out bytes.Buffer
	if err := pageTemplate.Execute(&out, newView(&p)); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	_, err := w.Write(out.Bytes())
	return err
}

// view is what the template sees: text ready to show, markup made here.
type view struct {
	Title, Counted, Unit string
	Policy               string
	CSS                  template.CSS
	JS                   template.JS
	Words                []template.HTML
	Warnings, Cautions   []template.HTML
	Caution              string
	Map                  template.HTML
	Legend               []legendRow
	ManyBands            bool
	Layers               []layer
	Placeless, Weighted  bool
	Regions              []regionRow
	Rule                 string
	Peaks, MorePeaks     []peakRow
	UnlistedPeaks        int
	Choices              []choiceRow
	TradeOff, Profile    template.HTML
	ProfileName          template.HTML
	Small                []smallMap
	SmallNotes           []template.HTML
	Stability            []stabilityRow
	Facts                []factGroup
	Files                []fileRow
	Run                  []fact
}

type legendRow struct {
	Class      string
	Text       template.HTML
	Unlabelled bool // its text is for readers that cannot see, for want of room
}
type layer struct {
	ID, Text, Class string
	Off             bool
}
type regionRow struct {
	ID, Class, Name                           string
	Area, Events, Share, Threshold, Mean, Low template.HTML
	Parts                                     int
}
type peakRow struct {
	ID, Rank, Place, Region                     string
	Intensity, StdError, Bias, Debiased, Effect template.HTML
}
type choiceRow struct {
	Method                                             template.HTML
	Shape, Major, Minor, Bearing, Error, Status, Notes string
	Used                                               bool
}
type smallMap struct {
	Name string
	SVG  template.HTML
	Rows []string
}
type stabilityRow struct{ What, Value, Low, High, Share, How string }
type fact struct {
	Name  string
	Value template.HTML
}
type factGroup struct {
	Name  string
	Facts []fact
}
type fileRow struct {
	Name, What, Size, SHA string
	Link                  bool
}

func newView(p *Page) *view {
	rec := p.Record
	highest := 0.0
	for _, b := range p.Release.Bands() {
		highest = max(highest, b.FromPerKM2)
	}
	for _, k := range p.Release.Peaks() {
		highest = max(highest, k.IntensityPerKM2)
	}
	u := unitFor(highest)
	s := newScene(p, mapFrame(p, mapWidth, mapLeast, mapMost))
	css := styleText + bandStyles(max(len(p.Release.Bands()), 1))
	v := &view{
		Title: shown(p.title()), Counted: capital(p.counted()), Unit: u.name, CSS: template.CSS(css), JS: template.JS(scriptText),
		Policy:  "default-src 'none'; script-src " + hashOf(scriptText) + "; style-src " + hashOf(css) + "; img-src data:; base-uri 'none'; form-action 'none'",
		Words:   words(p, u),
		Caution: record.Caution, Placeless: p.placeless(), Weighted: p.counted() != "events",
		Map: mapSVG(p, s, u), Legend: legend(p, u), ManyBands: len(p.Release.Bands()) > mostLabelled, Layers: layers(p, s),
		Regions: regionRows(p, u), Rule: shown(rec.Regions.Text), Choices: choiceRows(p),
		Facts: facts(p), Files: fileRows(p), Run: runFacts(rec),
	}
	for _, t := range rec.Warnings {
		v.Warnings = append(v.Warnings, foreign(t))
	}
	for _, t := range rec.Cautions {
		v.Cautions = append(v.Cautions, foreign(t))
	}
	all := peakRows(p, u)
	v.Peaks, v.MorePeaks = all[:min(len(all), firstPeaks)], all[min(len(all), firstPeaks):min(len(all), mostPeaks)]
	v.UnlistedPeaks = max(0, len(all)-mostPeaks)
	if a := rec.Bandwidth.AMISE; a != nil {
		v.TradeOff, _ = tradeOff(a)
	}
	if p.Profile != nil {
		v.Profile, _ = profile(p.Profile)
		v.ProfileName = foreign(p.Profile.Name)
	}
	v.small(p)
	for _, t := range p.Stability {
		v.Stability = append(v.Stability, stabilityRow{shown(t.What), significant(t.Value, 3), significant(t.Low, 3), significant(t.High, 3), shareText(t.Share), shown(t.How)})
	}
	return v
}

func hashOf(s string) string {
	h := sha256.Sum256([]byte(s))
	return "'sha256-" + base64.StdEncoding.EncodeToString(h[:]) + "'"
}

// bandStyles are the colours of the bands on a light and a dark page.
func bandStyles(n int) string {
	var light, dark, use strings.Builder
	for i := range n {
		fmt.Fprintf(&light, "--b%d:%s;", i, hex(bandColour(i, n, false)))
		fmt.Fprintf(&dark, "--b%d:%s;", i, hex(bandColour(i, n, true)))
		fmt.Fprintf(&use, ".b%d{fill:var(--b%d);background:var(--b%d)}", i, i, i)
	}
	return fmt.Sprintf("\n:root{%s}\n@media screen and (prefers-color-scheme:dark){:root:not(:has(#c-light:checked)){%s}}\n@media screen{:root:has(#c-dark:checked){%s}}\n%s\n",
		light.String(), dark.String(), dark.String(), use.String())
}

func legend(p *Page, u areaUnit) (rows []legendRow) {
	bands := p.Release.Bands()
	every := 1
	if len(bands) > mostLabelled {
		every = (len(bands) + 9) / 10
	}
	for i := len(bands) - 1; i >= 0; i-- {
		b := bands[i]
		id := fmt.Sprintf("band-%d", i+1)
		text := data(id+"/from_per_km2", same(b.FromPerKM2), level(b.FromPerKM2*u.km2))
		if math.IsInf(b.ToPerKM2, 0) {
			text = "over " + text
		} else {
			text += " to " + data(id+"/to_per_km2", same(b.ToPerKM2), level(b.ToPerKM2*u.km2))
		}
		rows = append(rows, legendRow{Class: fmt.Sprintf("b%d", i), Text: text, Unlabelled: (len(bands)-1-i)%every != 0})
	}
	return rows
}

func layers(p *Page, s *scene) []layer {
	out := []layer{{ID: "bands", Text: "bands of intensity"}, {ID: "regions", Text: "regions"}, {ID: "peaks", Text: "peaks"}}
	if len(s.grid) > 0 {
		text := "degrees"
		if p.placeless() {
			text = "coordinates"
		}
		out = append(out, layer{ID: "grid", Text: text})
	}
	if len(s.study) > 0 {
		out = append(out, layer{ID: "study", Text: "study area"})
	}
	if len(s.context) > 0 {
		out = append(out, layer{ID: "context", Text: "lines for orientation"})
	}
	return append(out, layer{ID: "spread", Text: "spread of one event"})
}

func regionRows(p *Page, u areaUnit) (rows []regionRow) {
	for i, r := range p.Release.Regions() {
		id := regionID(r.Content)
		rows = append(rows, regionRow{
			ID: id, Class: fmt.Sprintf("r%d", min(i, 3)), Name: contentText(r.Content), Parts: len(r.Plane),
			Area:   data(id+"/area_km2", same(r.AreaKM2), areaText(r.AreaKM2)),
			Events: data(id+"/events", exact(math.Round(r.Events.Estimate)), count(r.Events.Estimate)),
			Low: data(id+"/events_min", exact(max(0, math.Floor(r.Events.Min+1e-6))), count(math.Floor(r.Events.Min+1e-6))) + " to " +
				data(id+"/events_max", exact(math.Ceil(r.Events.Max-1e-6)), count(math.Ceil(r.Events.Max-1e-6))),
			Share:     data(id+"/event_share", same(r.EventShare), shareText(r.EventShare)),
			Threshold: data(id+"/threshold_per_km2", same(r.ThresholdPerKM2), significant(r.ThresholdPerKM2*u.km2, 3)),
			Mean:      data(id+"/mean_per_km2", same(r.MeanPerKM2), significant(r.MeanPerKM2*u.km2, 3)),
		})
	}
	return rows
}

func peakRows(p *Page, u areaUnit) (rows []peakRow) {
	step := p.Release.Surface().Step[0]
	for _, k := range p.Release.Peaks() {
		id := fmt.Sprintf("peak-%d", k.Rank)
		number := func(member string, v float64, digits int) template.HTML {
			return data(id+"/"+member, same(v), significant(v*u.km2, digits))
		}
		row := peakRow{
			ID: id, Rank: fmt.Sprint(k.Rank), Place: placeText(k.Position, p.placeless(), step), Region: "none",
			Intensity: number("intensity_per_km2", k.IntensityPerKM2, 3), StdError: number("standard_error_per_km2", k.StandardErrorPerKM2, 2),
			Bias: number("smoothing_bias_per_km2", k.SmoothingBiasPerKM2, 2), Debiased: number("debiased_per_km2", k.DebiasedPerKM2, 3),
			Effect: data(id+"/effective_events", same(k.EffectiveEvents), significant(k.EffectiveEvents, 2)),
		}
		if k.Region > 0 {
			row.Region = contentText(k.Region)
		}
		rows = append(rows, row)
	}
	return rows
}

func choiceRows(p *Page) (rows []choiceRow) {
	choices := p.Choices
	if len(choices) == 0 {
		b := p.Record.Bandwidth
		c := Choice{Method: b.Method, Shape: b.Shape, Major: b.Major, Minor: b.Minor, Bearing: b.Bearing, Status: b.Status, Evaluations: b.Evaluations, Notes: b.Notes, Used: true, EstimatedErrorRatio: 1}
		if b.AMISE == nil {
			c.EstimatedErrorRatio = 0
		}
		choices = []Choice{c}
	}
	for _, c := range choices {
		row := choiceRow{Method: foreign(c.Method), Shape: shown(c.Shape), Major: lengthText(c.Major), Minor: lengthText(c.Minor), Bearing: fmt.Sprintf("%.0f°", c.Bearing), Error: "not known", Status: shown(c.Status), Notes: shown(strings.Join(c.Notes, "; ")), Used: c.Used}
		if c.EstimatedErrorRatio > 0 {
			row.Error = significant(c.EstimatedErrorRatio, 3)
		}
		rows = append(rows, row)
	}
	return rows
}

// small lays the regions at other multiples of H beside those at H, in one
// frame.
func (v *view) small(p *Page) {
	if len(p.Alternatives) == 0 {
		return
	}
	all := append(slices.Clone(p.Alternatives), Alternative{Factor: 1, Regions: p.Release.Regions()})
	slices.SortStableFunc(all, func(a, b Alternative) int {
		if a.Factor < b.Factor {
			return -1
		}
		return 1
	})
	lo, hi := spatial.XY{X: math.Inf(1), Y: math.Inf(1)}, spatial.XY{X: math.Inf(-1), Y: math.Inf(-1)}
	for _, a := range all {
		for _, r := range a.Regions {
			bounds(&lo, &hi, r.Plane)
		}
	}
	bounds(&lo, &hi, p.StudyArea)
	f := newFrame(lo, hi, smallWidth, smallWidth/2, smallWidth*5/4)
	for _, a := range all {
		m := smallMap{Name: factorText(a.Factor), SVG: smallSVG(f, a.Regions, p.StudyArea, "Regions with "+factorText(a.Factor))}
		if a.Factor == 1 {
			m.Name = "H, used"
		}
		for _, r := range a.Regions {
			text := contentText(r.Content) + ": " + areaText(r.AreaKM2) + ", " + partsText(len(r.Plane))
			if o := overlapOf(p.Record, a.Factor, r.Content); o > 0 {
				text += fmt.Sprintf(", %.0f %% shared with H", 100*o)
			}
			m.Rows = append(m.Rows, text)
		}
		if a.Note != "" {
			v.SmallNotes = append(v.SmallNotes, template.HTML(template.HTMLEscapeString(factorText(a.Factor)+": "))+foreign(a.Note))
		}
		v.Small = append(v.Small, m)
	}
}

func overlapOf(rec *record.Record, factor, content float64) float64 {
	for _, s := range rec.Sensitivity {
		if s.Factor != factor {
			continue
		}
		for _, r := range s.Regions {
			if r.Content == content {
				return r.Overlap
			}
		}
	}
	return 0
}

// runFacts are the lines that differ between equal runs.
func runFacts(rec *record.Record) (out []fact) {
	for _, in := range rec.Inputs {
		name := in.Path[strings.LastIndexByte(in.Path, '\\')+1:]
		text := foreign(path.Base(name)) + template.HTML(template.HTMLEscapeString(fmt.Sprintf(": %s, %s rows", shown(in.Format), count(float64(in.Rows)))))
		if in.Bytes >= 0 {
			text += template.HTML(", " + count(float64(in.Bytes)) + " bytes")
		}
		if in.Digest.Value != "" {
			text += "; " + foreign(in.Digest.Algorithm) + " of " + foreign(in.Digest.Scope) + " <code>" + foreign(in.Digest.Value) + "</code>"
		}
		out = append(out, fact{"input", text})
	}
	return append(out, fact{"workers", template.HTML(fmt.Sprint(rec.Workers))}, fact{"started", template.HTML(rec.Times.Started.UTC().Format(time.RFC3339))})
}
