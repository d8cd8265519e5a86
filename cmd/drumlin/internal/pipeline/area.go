package pipeline

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"github.com/paulmach/orb"

	"drumlin/io/events"
	"drumlin/io/geojson"
	"drumlin/io/record"
	"drumlin/mv"
	"drumlin/spatial"
)

// areaFile is a study area as read and, later, on the plane.
type areaFile struct {
	path   string
	digest record.Digest
	shape  orb.MultiPolygon // degrees, or metres without a place
	plane  *spatial.StudyArea
}

// readPolygons reads the polygons of a GeoJSON file; what says what they are for.
func readPolygons(path, what string, plane bool) ([]geojson.Named, record.Digest, error) {
	fault := func(kind error, text, remedy string, cause error) error {
		return &events.Fault{Kind: kind, File: path, What: text, Remedy: remedy, Cause: cause}
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, record.Digest{}, fault(events.ErrMissing, "the "+what+" cannot be read", "check the path", err)
	}
	if bytes.HasPrefix(data, []byte("PAR1")) {
		return nil, record.Digest{}, fault(events.ErrUnsupported, "the "+what+" is a Parquet file", "convert it to GeoJSON", nil)
	}
	digest, _, err := record.FileDigest(path)
	if err != nil {
		return nil, digest, fault(events.ErrMissing, "the "+what+" cannot be read again for its digest", "", err)
	}
	named, err := geojson.Reader{Plane: plane}.Polygons(bytes.NewReader(data))
	if err != nil {
		kind := events.ErrMalformed
		if errors.Is(err, geojson.ErrUnsupported) || errors.Is(err, geojson.ErrTooLarge) {
			kind = events.ErrUnsupported
		}
		return nil, digest, fault(kind, "the "+what+" cannot be used: "+strings.TrimPrefix(err.Error(), "geojson: "), "give polygons as GeoJSON", nil)
	}
	return named, digest, nil
}

// readArea reads the study area, nil when there is none.
func readArea(path string, plane bool) (*areaFile, error) {
	if path == "" {
		return nil, nil
	}
	named, digest, err := readPolygons(path, "study area", plane)
	if err != nil {
		return nil, err
	}
	a := &areaFile{path: path, digest: digest}
	for _, n := range named {
		a.shape = append(a.shape, n.Shape...)
	}
	return a, nil
}

// onPlane takes it to the plane of the estimate.
func (a *areaFile) onPlane(p spatial.Projection) (err error) {
	if a == nil {
		return nil
	}
	if a.plane, err = spatial.NewStudyArea(a.shape, p); err != nil {
		kind := events.ErrMalformed
		if errors.Is(err, spatial.ErrUnsupportedGeometry) {
			kind = events.ErrUnsupported
		}
		return &events.Fault{Kind: kind, File: a.path, What: "the study area cannot be used: " + strings.TrimPrefix(err.Error(), "spatial: "), Remedy: "repair the polygons"}
	}
	return nil
}

// drop takes out positions outside the area, in place.
func (a *areaFile) drop(x, y, w []float64, acc *events.Account) (x2, y2, w2 []float64) {
	k := 0
	for i := range x {
		if a.plane.Contains(spatial.XY{X: x[i], Y: y[i]}) {
			x[k], y[k] = x[i], y[i]
			if w != nil {
				w[k] = w[i]
			}
			k++
		}
	}
	acc.Withdraw(events.OutsideStudyArea, int64(len(x)-k))
	if w != nil {
		w = w[:k]
	}
	return x[:k], y[:k], w
}

// edge says how an estimate ends at the border of the study area.
type edge struct {
	area *spatial.StudyArea // nil: nowhere
	form string             // renormalise, conserve, none
}

// edgeText says a form in a sentence.
func edgeText(form string) string {
	switch form {
	case "renormalise":
		return "the estimate is divided by the kernel's mass inside the study area: evenly spread events give an even map up to the border; the total is not kept exactly"
	case "conserve":
		return "each event is weighted by one over its kernel's mass inside the study area: the estimate holds every event, and is too low by up to a third along the border where events are evenly spread"
	}
	return "the kernels lose what they spread beyond the border: the estimate is too low by up to a half along it"
}

// surface computes the density with the estimate's matrix, corrected at the
// edge, and what the correction rests on; with errors, what errors need too.
func (e *Estimate) surface(errors bool) error {
	h := e.Choice.Matrix
	if e.Edge.area == nil || e.Edge.form == "none" {
		e.Density = e.Spectrum.Density(h)
		clampNegative(e.Density.Values)
		if e.Edge.area != nil {
			e.Edge.area.End(e.Density)
		}
		return nil
	}
	matrices := []mv.BandwidthMatrix{h}
	if errors {
		half, err := h.Scaled(0.5)
		if err != nil {
			return fmt.Errorf("half the bandwidth matrix: %w", err)
		}
		matrices = append(matrices, half)
	}
	p, err := e.Edge.area.KernelMass(e.Counts.Lattice, e.options.Workers, matrices...)
	if err != nil {
		return err
	}
	if e.Inside = p[0]; errors {
		e.InsideHalf = p[1]
	}
	if e.Edge.form == "renormalise" {
		e.Density = e.Spectrum.Density(h)
		clampNegative(e.Density.Values)
		e.Edge.area.Renormalise(e.Density, e.Inside)
		return nil
	}
	fine, err := e.Edge.area.KernelMass(e.nodes.Lattice, e.options.Workers, h)
	if err != nil {
		return err
	}
	weights := mv.Grid{Lattice: e.nodes.Lattice, Values: append([]float64(nil), e.nodes.Values...)}
	e.Edge.area.Conserve(weights, fine[0])
	s, err := mv.NewSpectrum(weights, e.options)
	if err != nil {
		return err
	}
	e.Density = s.Density(h)
	clampNegative(e.Density.Values)
	ratio := total(weights.Values) / total(e.nodes.Values)
	for i := range e.Density.Values {
		e.Density.Values[i] *= ratio
	}
	e.Edge.area.End(e.Density)
	return nil
}

func total(v []float64) (sum float64) {
	for _, x := range v {
		sum += x
	}
	return sum
}

// leaveOneOut returns, at every node, the density there without an event's own
// kernel: (n f - K_H(0)/p)/(n-1).
func (e *Estimate) leaveOneOut(atZero float64) []float64 {
	out := make([]float64, len(e.Density.Values))
	for i, f := range e.Density.Values {
		out[i] = max(0, mv.LeaveOneOut(f, e.EffectiveN, atZero/e.Inside.Values[i]))
	}
	return out
}

// massWeights is the probability at every node.
func (e *Estimate) massWeights() []float64 {
	if e.Edge.area == nil {
		return e.Density.Values
	}
	out := e.Edge.area.Mask(e.Density.Lattice).Values
	for i, f := range e.Density.Values {
		out[i] *= f
	}
	return out
}

// seen is the density without the nodes outside the study area.
func (e *Estimate) seen() mv.Grid {
	if e.Edge.area == nil {
		return e.Density
	}
	g := mv.NewGrid(e.Density.Lattice)
	nx := g.N[0]
	for i, f := range e.Density.Values {
		g.Values[i] = f
		if !e.Edge.area.Contains(spatial.XY{X: g.Coord(0, i%nx), Y: g.Coord(1, i/nx)}) {
			g.Values[i] = math.NaN()
		}
	}
	return g
}

// top is the highest density at a node.
func (e *Estimate) top() (most float64) {
	for _, v := range e.seen().Values {
		if v > most {
			most = v
		}
	}
	return most
}

// awayFromEdge is the kernel mass inside from which on an edge is not felt.
const awayFromEdge = 0.99

// summit is a peak with its error. Near an edge the variance is that of the
// corrected estimate, f R(K) p_(H/2) / (n sqrt|H| p^2), and the smoothing bias,
// of first order in H's scale there, is not known.
func (e *Estimate) summit(at spatial.XY, density float64) spatial.Summit {
	variance := mv.LeadingVariance(mv.Gaussian, e.Choice.Matrix, density, e.EffectiveN)
	s := spatial.Summit{At: at, Density: density, SmoothingBias: spatial.Sample(e.Bias, at)}
	if len(e.Inside.Values) > 0 {
		p, half := min(1, spatial.Sample(e.Inside, at)), min(1, spatial.Sample(e.InsideHalf, at))
		s.Inside = p
		variance *= half / (p * p)
		if p < awayFromEdge {
			s.SmoothingBias = math.NaN()
		}
	}
	s.StandardError = math.Sqrt(variance)
	return s
}

// areaRecord is the study area for the record.
func areaRecord(a *areaFile, e *Estimate) *record.StudyArea {
	if a == nil {
		return nil
	}
	out := &record.StudyArea{
		File: filepath.Base(a.path), Digest: a.digest, Vertices: a.plane.Vertices(), AreaKM2: roundTo(a.plane.Area()/perKM2, 12),
		Edge: e.Edge.form, Text: edgeText(e.Edge.form), MassInside: roundTo(a.plane.MassInside(e.Density), 9), LeastInside: 1,
	}
	for _, p := range a.plane.Plane() {
		out.Polygons++
		out.Holes += len(p) - 1
	}
	for i, p := range e.Inside.Values {
		if e.Counts.Values[i] > 0 {
			out.LeastInside = min(out.LeastInside, p)
		}
	}
	return out
}

const (
	mostStretch = 0.1 // share by which the plane may change lengths without a warning
	mostBend    = 10  // degrees by which it may change angles
)

// warnDistortion says plainly what the plane does to shapes over a wide extent.
func (r *run) warnDistortion(p spatial.Projection, e *Estimate) {
	d := distortion(p, e.Density.Lattice)
	if d == nil || d.ScaleGreatest <= 1+mostStretch && d.ScaleLeast >= 1-mostStretch && d.Angle <= mostBend {
		return
	}
	areas := "areas and intensities are true"
	if !p.EqualArea() {
		areas = fmt.Sprintf("areas are off by factors of %.3g to %.3g", d.AreaLeast, d.AreaGreatest)
	}
	r.warnings = append(r.warnings, fmt.Sprintf("the extent is wide for one plane: towards its rim lengths are drawn %.3g to %.3g times true and angles are off by up to %.0f degrees, so the bandwidth there is not what it is at the centre; %s; map parts of it apart where that matters", d.ScaleLeast, d.ScaleGreatest, d.Angle, areas))
}

// readZones reads the zones and takes them to the plane, within the study area.
func (r *run) readZones(in *reading) ([]spatial.ZoneArea, *record.Zones, error) {
	path := r.settings.Zones
	if path == "" {
		return nil, nil, nil
	}
	named, digest, err := readPolygons(path, "zones", in.input.Plane)
	if err != nil {
		return nil, nil, err
	}
	rec := &record.Zones{File: filepath.Base(path), Digest: digest}
	var out []spatial.ZoneArea
	for i, n := range named {
		name := n.Name("name", "NAME", "Name", "title", "label")
		z := spatial.ZoneArea{ID: n.ID, Name: name}
		z.Area, err = spatial.NewStudyArea(n.Shape, in.plane)
		if err == nil && in.area != nil {
			z.Area, err = in.area.plane.Within(z.Area)
		}
		if err != nil {
			kind := events.ErrMalformed
			if errors.Is(err, spatial.ErrUnsupportedGeometry) {
				kind = events.ErrUnsupported
			}
			return nil, nil, &events.Fault{Kind: kind, File: path, What: fmt.Sprintf("zone %d %q cannot be used: %s", i+1, name, strings.TrimPrefix(err.Error(), "spatial: ")), Remedy: "repair the polygons"}
		}
		if z.Area == nil {
			rec.Outside++
			continue
		}
		out = append(out, z)
	}
	if rec.Zones = len(out); rec.Outside > 0 {
		r.warnings = append(r.warnings, fmt.Sprintf("%d of %d zones lie outside the study area and were left out", rec.Outside, len(named)))
	}
	return out, rec, nil
}
