package report

import (
	"math"

	"drumlin/spatial"
)

// scene is the map in drawing units, ready for SVG or for a picture.
type scene struct {
	f        frame
	bands    [][][]point // from each band upwards, rings
	regions  []regionShape
	study    [][]point
	context  [][]point
	grid     []gridLine
	marks    []mark
	dots     []point // peaks without a number
	bar      scaleBar
	north    float64 // degrees clockwise from up
	hasNorth bool
	spread   ellipse // the kernel at one scale
}

type regionShape struct {
	content float64
	rings   [][]point
}

// mark is a numbered peak: where it is and where its number stands.
type mark struct {
	rank      int
	at, label point
}

type scaleBar struct {
	units int // drawing units of its whole length
	text  string
	half  string
}

// ellipse in drawing units; bearing in degrees clockwise from up.
type ellipse struct {
	at           point
	major, minor float64
	bearing      float64
	on           bool // on the map itself, for it is too large for the strip
}

const (
	mostMarks  = 20           // peaks with a number on the map
	mostDots   = 200          // further ones as dots
	markRadius = 9 * perPixel // of the numbered disc
	stripMost  = 120          // pixels: largest ellipse in the strip below the map
	areaMarks  = 4.0          // pixels between discs
	moves      = 16           // directions tried for a number that has no room
)

// newScene lays the map out in a frame.
func newScene(p *Page, f frame) *scene {
	s := &scene{f: f}
	for _, rings := range above(p.Release.Bands()) {
		var shape [][]point
		for _, r := range rings {
			shape = append(shape, f.ring(r))
		}
		s.bands = append(s.bands, shape)
	}
	s.regions = regionShapes(&f, p.Release.Regions())
	s.study = f.shape(p.StudyArea)
	for _, l := range p.Context {
		for _, part := range clipLine(&f, l) {
			if c := f.line(part); len(c) > 1 {
				s.context = append(s.context, c)
			}
		}
	}
	s.grid = graticule(&f, p.Projection)
	s.placeMarks(p.Release.Peaks(), smallParts(s.regions))
	s.bar = barFor(&f)
	if !p.placeless() {
		s.north, s.hasNorth = northAt(&f, p.Projection), true
	}
	b := p.Record.Bandwidth
	s.spread = ellipse{major: b.Major / f.unit, minor: b.Minor / f.unit, bearing: b.Bearing}
	if 2*s.spread.major > stripMost*perPixel {
		s.spread.on = true
		s.spread.at = point{f.w / 2, f.h / 2}
		if peaks := p.Release.Peaks(); len(peaks) > 0 {
			s.spread.at = f.point(peaks[0].At)
		}
	}
	return s
}

func regionShapes(f *frame, regions []spatial.Region) (out []regionShape) {
	for i := len(regions) - 1; i >= 0; i-- { // the widest first, so that the inner lines lie on top
		out = append(out, regionShape{regions[i].Content, f.shape(regions[i].Plane)})
	}
	return out
}

// mapFrame fits the main map around all that is released and the study area.
func mapFrame(p *Page, width, least, most int) frame {
	lo, hi := spatial.XY{X: math.Inf(1), Y: math.Inf(1)}, spatial.XY{X: math.Inf(-1), Y: math.Inf(-1)}
	for _, b := range p.Release.Bands() {
		bounds(&lo, &hi, b.Plane)
	}
	for _, r := range p.Release.Regions() {
		bounds(&lo, &hi, r.Plane)
	}
	bounds(&lo, &hi, p.StudyArea)
	return newFrame(lo, hi, width, least, most)
}

// placeMarks gives the highest peaks a number at their place, or beside it with
// a leader where another stands too near.
func (s *scene) placeMarks(peaks []spatial.Peak, avoid []point) {
	n := min(len(peaks), mostMarks)
	at := make([]point, n)
	for i := range n {
		at[i] = s.f.point(peaks[i].At)
	}
	gap := 2*markRadius + areaMarks*perPixel
	for i := range n {
		m := mark{rank: peaks[i].Rank, at: at[i], label: at[i]}
		best := s.crowding(m.label, at, i, gap, avoid)
		for _, radius := range []float64{24, 36, 52, 72} {
			if best == 0 {
				break
			}
			for k := range moves {
				sin, cos := math.Sincos(2 * math.Pi * float64(k) / moves)
				q := point{at[i].x + int(math.Round(radius*perPixel*sin)), at[i].y - int(math.Round(radius*perPixel*cos))}
				if q.x < markRadius || q.y < markRadius || q.x > s.f.w-markRadius || q.y > s.f.h-markRadius {
					continue
				}
				if c := s.crowding(q, at, i, gap, avoid); c < best {
					best, m.label = c, q
				}
			}
		}
		s.marks = append(s.marks, m)
	}
	for _, p := range peaks[n:min(len(peaks), mostMarks+mostDots)] {
		s.dots = append(s.dots, s.f.point(p.At))
	}
}

// smallParts returns the middles of parts of regions that a disc would hide.
func smallParts(regions []regionShape) (out []point) {
	for _, r := range regions {
		for _, ring := range r.rings {
			lo, hi := ring[0], ring[0]
			for _, p := range ring {
				lo, hi = point{min(lo.x, p.x), min(lo.y, p.y)}, point{max(hi.x, p.x), max(hi.y, p.y)}
			}
			if max(hi.x-lo.x, hi.y-lo.y) < 3*markRadius {
				out = append(out, point{(lo.x + hi.x) / 2, (lo.y + hi.y) / 2})
			}
		}
	}
	return out
}

// crowding adds up how far a disc at q would reach into other discs and, half
// as bad, over the places of other peaks and small parts of regions.
func (s *scene) crowding(q point, at []point, self int, gap float64, avoid []point) float64 {
	var sum float64
	for _, p := range avoid {
		sum += max(0, 2.2*markRadius-distance(q, p)) / 2
	}
	for _, m := range s.marks {
		sum += max(0, gap-distance(q, m.label))
	}
	for i, p := range at {
		if i != self {
			sum += max(0, markRadius*1.3-distance(q, p)) / 2
		}
	}
	return sum
}

func distance(a, b point) float64 { return math.Hypot(float64(a.x-b.x), float64(a.y-b.y)) }

// barFor chooses a round length of about a fifth of the map.
func barFor(f *frame) scaleBar {
	length := roundStep(float64(f.w)*f.unit/4, false)
	return scaleBar{units: int(math.Round(length / f.unit)), text: barText(length), half: barText(length / 2)}
}

func barText(m float64) string {
	if m >= 1000 {
		return level(m/1000) + nb + "km"
	}
	return level(m) + nb + "m"
}
