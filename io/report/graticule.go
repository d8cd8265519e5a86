package report

import (
	"math"
	"strconv"

	"drumlin/spatial"
)

// gridLine is one line of the graticule with its label.
type gridLine struct {
	runs  [][]point // parts inside the frame
	label string
	at    point // where the label's text stands
	side  int   // of that place: left, middle or right
	ew    bool  // a meridian, or a line of equal x
}

// geographic bounds of a frame, degrees (metres on a plane without a place).
type geoBox struct{ lonLo, lonHi, latLo, latHi float64 }

const (
	graticuleWanted = 5   // lines along the longer side
	lineSamples     = 96  // positions a line
	boxSamples      = 25  // a side, to find the bounds
	mostLines       = 400 // a guard: no frame needs more
)

// graticule draws meridians and parallels at round steps, through the inverse
// of the projection; on a plane without a place, lines of equal x and y.
func graticule(f *frame, proj spatial.Projection) []gridLine {
	placeless := proj.CRS().Method == "plane"
	box, ok := geoBounds(f, proj)
	if !ok {
		return nil
	}
	var out []gridLine
	for _, ew := range []bool{true, false} {
		lo, hi := box.latLo, box.latHi
		if ew {
			lo, hi = box.lonLo, box.lonHi
		}
		step := roundStep((hi-lo)/graticuleWanted, !placeless)
		first, last := math.Ceil(lo/step-1e-9), math.Floor(hi/step+1e-9)
		if !(last-first < mostLines) {
			continue
		}
		for k := first; k <= last; k++ {
			l := traceLine(f, proj, box, k*step, ew)
			if len(l.runs) == 0 {
				continue
			}
			l.label = gridLabel(k*step, step, ew, placeless)
			l.place(f)
			out = append(out, l)
		}
	}
	return out
}

// geoBounds samples the frame. ok is false when no part of it has a place.
func geoBounds(f *frame, proj spatial.Projection) (geoBox, bool) {
	var q spatial.XYs
	for j := range boxSamples {
		for i := range boxSamples {
			p := f.back(float64(f.w)*float64(i)/(boxSamples-1), float64(f.h)*float64(j)/(boxSamples-1))
			q.X, q.Y = append(q.X, p.X), append(q.Y, p.Y)
		}
	}
	g := proj.Inverse(q)
	b := geoBox{math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)}
	for i := range g.Lon {
		if math.IsNaN(g.Lon[i]) || math.IsNaN(g.Lat[i]) {
			continue
		}
		b.lonLo, b.lonHi = min(b.lonLo, g.Lon[i]), max(b.lonHi, g.Lon[i])
		b.latLo, b.latHi = min(b.latLo, g.Lat[i]), max(b.latHi, g.Lat[i])
	}
	return b, b.lonHi > b.lonLo && b.latHi > b.latLo
}

// roundStep returns the greatest round number not above v; for degrees also
// those that divide 90.
func roundStep(v float64, degrees bool) float64 {
	if degrees && v >= 1 {
		for _, s := range []float64{30, 15, 10, 5, 2} {
			if v >= s {
				return s
			}
		}
		return 1
	}
	unit := math.Pow(10, math.Floor(math.Log10(v)))
	for _, s := range []float64{5, 2} {
		if v >= s*unit {
			return s * unit
		}
	}
	return unit
}

// traceLine projects one line and keeps what lies inside the frame.
func traceLine(f *frame, proj spatial.Projection, box geoBox, value float64, ew bool) gridLine {
	var g spatial.LonLats
	for i := range lineSamples {
		t := float64(i) / (lineSamples - 1)
		lon, lat := value, box.latLo+t*(box.latHi-box.latLo)
		if !ew {
			lon, lat = box.lonLo+t*(box.lonHi-box.lonLo), value
		}
		g.Lon, g.Lat = append(g.Lon, lon), append(g.Lat, lat)
	}
	q := proj.Forward(g)
	l := gridLine{ew: ew}
	var run []spatial.XY
	flush := func() {
		for _, part := range clipLine(f, run) {
			l.runs = append(l.runs, f.line(part))
		}
		run = nil
	}
	for i := range q.X {
		if math.IsNaN(q.X[i]) || math.IsNaN(q.Y[i]) {
			flush()
			continue
		}
		run = append(run, spatial.XY{X: q.X[i], Y: q.Y[i]})
	}
	flush()
	return l
}

// clipLine cuts a line at the frame's border (Liang and Barsky's parameters,
// segment by segment).
func clipLine(f *frame, l []spatial.XY) [][]spatial.XY {
	var out [][]spatial.XY
	var run []spatial.XY
	for i := 1; i < len(l); i++ {
		ax, ay := f.at(l[i-1])
		bx, by := f.at(l[i])
		t0, t1 := 0.0, 1.0
		dx, dy := bx-ax, by-ay
		ok := true
		for _, e := range [4][2]float64{{-dx, ax}, {dx, float64(f.w) - ax}, {-dy, ay}, {dy, float64(f.h) - ay}} {
			switch p, q := e[0], e[1]; {
			case p == 0:
				ok = ok && q >= 0
			case p < 0:
				t0 = max(t0, q/p)
			default:
				t1 = min(t1, q/p)
			}
		}
		if !ok || t0 >= t1 {
			if len(run) > 1 {
				out = append(out, run)
			}
			run = nil
			continue
		}
		a, b := f.back(ax+t0*dx, ay+t0*dy), f.back(ax+t1*dx, ay+t1*dy)
		if len(run) == 0 || t0 > 0 {
			if len(run) > 1 {
				out = append(out, run)
			}
			run = []spatial.XY{a}
		}
		run = append(run, b)
	}
	if len(run) > 1 {
		out = append(out, run)
	}
	return out
}

// place puts a meridian's label where it meets the lower border, else the
// upper; a parallel's at the left, else the right. A line that meets neither,
// or only near a corner, keeps no label.
func (l *gridLine) place(f *frame) {
	const near, corner, edge = 4, 240, 120 // drawing units
	text := l.label
	l.label = ""
	for _, second := range []bool{false, true} {
		for _, run := range l.runs {
			for _, p := range run {
				inX, inY := p.x > corner && p.x < f.w-corner, p.y > edge && p.y < f.h-edge
				switch {
				case l.ew && !second && inX && p.y > f.h-near:
					l.at, l.side, l.label = point{p.x, f.h - 24}, middle, text
				case l.ew && second && inX && p.y < near:
					l.at, l.side, l.label = point{p.x, 60}, middle, text
				case !l.ew && !second && inY && p.x < near:
					l.at, l.side, l.label = point{20, p.y - 14}, left, text
				case !l.ew && second && inY && p.x > f.w-near:
					l.at, l.side, l.label = point{f.w - 20, p.y - 14}, right, text
				}
				if l.label != "" {
					return
				}
			}
		}
	}
}

func gridLabel(v, step float64, ew, placeless bool) string {
	if placeless {
		return level6(v) + nb + "m"
	}
	decimals := 0
	if step < 1 {
		decimals = int(math.Ceil(-math.Log10(step) - 1e-9))
	}
	if ew {
		v = math.Remainder(v, 360)
		if math.Abs(math.Abs(v)-180) < 1e-9 {
			return "180°"
		}
		return degreesText(v, decimals, "E", "W")
	}
	return degreesText(v, decimals, "N", "S")
}

// northAt returns the direction of north at the middle of the frame, degrees
// clockwise from up.
func northAt(f *frame, proj spatial.Projection) float64 {
	c := f.back(float64(f.w)/2, float64(f.h)/2)
	g := proj.Inverse(spatial.XYs{X: []float64{c.X}, Y: []float64{c.Y}})
	if math.IsNaN(g.Lat[0]) {
		return 0
	}
	d := 1e-3
	if g.Lat[0] > 89.99 {
		d = -d
	}
	q := proj.Forward(spatial.LonLats{Lon: []float64{g.Lon[0]}, Lat: []float64{g.Lat[0] + d}})
	dx, dy := q.X[0]-c.X, q.Y[0]-c.Y
	if d < 0 {
		dx, dy = -dx, -dy
	}
	if math.IsNaN(dx) || dx == 0 && dy == 0 {
		return 0
	}
	return math.Atan2(dx, dy) * 180 / math.Pi
}

// placeGrid is a coarse grid of positions for the page's script, which reads
// between its nodes with a parabola in each direction: n by n nodes, longitude
// and latitude, rows from the top; empty when a node has no place.
func placeGrid(f *frame, proj spatial.Projection, step float64) string {
	n := placeNodes
	var q spatial.XYs
	for j := range n {
		for i := range n {
			p := f.back(float64(f.w)*float64(i)/float64(n-1), float64(f.h)*float64(j)/float64(n-1))
			q.X, q.Y = append(q.X, p.X), append(q.Y, p.Y)
		}
	}
	g := proj.Inverse(q)
	decimals := placeDecimals(step) + 1
	var b []byte
	for i := range g.Lon {
		if math.IsNaN(g.Lon[i]) || math.IsNaN(g.Lat[i]) || i > 0 && math.Abs(g.Lon[i]-g.Lon[i-1]) > 180 && proj.CRS().Method != "plane" {
			return ""
		}
		if i > 0 {
			b = append(b, ' ')
		}
		b = strconv.AppendFloat(b, g.Lon[i]+0, 'f', decimals, 64)
		b = append(b, ' ')
		b = strconv.AppendFloat(b, g.Lat[i]+0, 'f', decimals, 64)
	}
	return string(b)
}

const placeNodes = 17
