package spatial

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"drumlin/mv"

	"github.com/paulmach/orb"
)

// ErrWithheld reports that the small-number guard left nothing to release.
var ErrWithheld = errors.New("withheld by the small-number guard")

// perKM2 turns a value per square metre into one per square kilometre.
const perKM2 = 1e6

// Guard turns an analysis into what may leave the program. It is the only way
// to make a Release.
//
// Regions and bands are drawn apart from each other, each as a forest of faces
// (see Isolines). A face of either with fewer than p.MinEvents events for
// certain (Count.Min) loses its outer ring and joins the face around it: a part
// joins the next lower band, a hole what surrounds it. So every part, hole and
// ring-shaped difference between nested releases of one family holds at least
// MinEvents events. Regions and bands are then built from the faces that are
// left. A region that no longer holds anything that the next smaller one does
// not is withheld whole, for it would show that one under another name.
//
// What is certain depends on the step of the counts: a node counts only when
// all its cells lie in the face, so in a face narrower than two steps nothing
// is certain and it joins its surroundings, however many events it may hold.
// Analysis.FineCounts sharpens this.
//
// A peak needs Events·density/KernelAtZero >= MinEvents and a place inside a
// released region or band. The surface is 0 outside the released bands; a node
// in a face that joined another is held within the levels of the band it is
// now in, so that what was withheld does not show. Without bands the regions
// take their place there.
//
// Intensities are per square kilometre of the plane: Total·density·1e6. Areas
// are those of the plane where it is equal-area, else those of the shape on the
// ellipsoid. When rounding to degrees makes rings meet, the levels are moved by
// a millionth part and drawn again, at most three times.
//
// Errors: ErrWithheld if there are regions but none can be released;
// ErrUnsupportedGeometry from the way back to degrees; mv.ErrShape and
// mv.ErrNotFinite for grids that do not fit together or hold no numbers;
// ErrLevels. The release does not depend on the number of workers.
func Guard(a Analysis, p Policy, proj Projection) (*Release, error) {
	if err := checkAnalysis(a, p); err != nil {
		return nil, err
	}
	regions, bands := make([]float64, 0, len(a.Regions)), a.BandLevels
	for _, t := range a.Regions {
		regions = append(regions, t.Density)
	}
	slices.Sort(regions)
	regions = slices.Compact(regions)
	var fams [2]*family
	var errs [2]error
	var wg sync.WaitGroup
	for n, levels := range [2][]float64{regions, bands} {
		wg.Go(func() { fams[n], errs[n] = drawFamily(a, levels, p, proj) })
	}
	wg.Wait()
	if err := errors.Join(errs[0], errs[1]); err != nil {
		return nil, err
	}
	r := &Release{crs: proj.CRS(), withheld: Withheld{
		MinEvents:   p.MinEvents,
		RegionParts: fams[0].d.parts, RegionHoles: fams[0].d.holes,
		BandParts: fams[1].d.parts, BandHoles: fams[1].d.holes,
	}}
	wg.Go(func() { r.surface = releaseSurface(a, fams, p, proj) })
	err := r.addRegions(a, fams[0], regions, proj)
	if err == nil {
		err = r.addBands(a, fams[1], proj)
	}
	wg.Wait()
	if err != nil {
		return nil, err
	}
	if len(a.Regions) > 0 && len(r.regions) == 0 {
		return nil, fmt.Errorf("spatial: %.0f events, and no part of any region certainly holds %g of them: %w; map a larger set or area, or lower --min-events if that is allowed",
			a.Events, p.MinEvents, ErrWithheld)
	}
	r.addPeaks(a, fams, p, proj)
	if err := r.addZones(a, p, proj); err != nil {
		return nil, err
	}
	return r, nil
}

func checkAnalysis(a Analysis, p Policy) error {
	if a.Density.Dim() != 2 || a.Density.N[0] < 2 || a.Density.N[1] < 2 {
		return fmt.Errorf("spatial: guard: the density has %v nodes; needs two axes of at least 2: %w", a.Density.N, mv.ErrShape)
	}
	if !sameLattice(a.Density.Lattice, a.Counts.Lattice) || len(a.Weights.Values) > 0 && !sameLattice(a.Density.Lattice, a.Weights.Lattice) {
		return fmt.Errorf("spatial: guard: density, counts and weights lie on different lattices: %w", mv.ErrShape)
	}
	if len(a.Density.Values) != a.Density.Len() || len(a.Counts.Values) != a.Density.Len() {
		return fmt.Errorf("spatial: guard: %d densities and %d counts on %d nodes: %w", len(a.Density.Values), len(a.Counts.Values), a.Density.Len(), mv.ErrShape)
	}
	for _, v := range []float64{a.Events, a.Total, p.MinEvents} {
		if v-v != 0 || v < 0 {
			return fmt.Errorf("spatial: guard: events %g, weight %g, least events %g: %w", a.Events, a.Total, p.MinEvents, mv.ErrNotFinite)
		}
	}
	for _, t := range a.Regions {
		if !(t.Density > 0) {
			return fmt.Errorf("spatial: guard: region %g has density %g on its border, not a positive number: %w", t.Content, t.Density, ErrLevels)
		}
	}
	for _, v := range a.BandLevels {
		if !(v > 0) {
			return fmt.Errorf("spatial: guard: band level %g is not a positive number: %w", v, ErrLevels)
		}
	}
	return nil
}

// sameLattice reports whether two lattices have the same nodes.
func sameLattice(a, b mv.Lattice) bool {
	return slices.Equal(a.Origin, b.Origin) && slices.Equal(a.Step, b.Step) && slices.Equal(a.N, b.N)
}

// family is a set of levels drawn together, after the guard.
type family struct {
	s     *Isolines
	c     *clip // nil without a study area
	m     *measure
	d     *dissolved
	areas []float64 // per face
	atOr  []outline // per level, where the label is above it
	equal []outline // per label, where it is just that; index 0 unused
	grid  []gridRing
	cut   [2][]cutShape // with a study area: the same two as shapes
	kept  []int         // level of each released region
}

// cutShape is an outline within the study area, on the plane and in degrees.
type cutShape struct {
	plane MultiPolygon
	shape orb.MultiPolygon
}

// clampFor keeps vertices about 5 cm from nodes and from each other, so that
// rounding to 1e-7 degree (1 cm) does not bring them together, within 1/1024
// and 1/64 of a step.
func clampFor(l mv.Lattice) float64 {
	return min(max(0.05/min(l.Step[0], l.Step[1]), defaultClamp), 1.0/64)
}

// drawFamily draws, measures, guards and rounds one set of levels.
func drawFamily(a Analysis, levels []float64, p Policy, proj Projection) (*family, error) {
	var touching error
	for try := range 4 {
		moved := make([]float64, len(levels))
		for k, v := range levels {
			moved[k] = v * (1 + 1e-6*float64(try))
		}
		s, err := NewIsolines(a.Density, moved, IsolineOptions{Clamp: clampFor(a.Density.Lattice), Workers: p.Workers})
		if err != nil {
			return nil, err
		}
		var f *family
		if a.Area != nil {
			f, err = drawClipped(a, s, p, proj)
		} else {
			f, err = drawOpen(a, s, p, proj)
		}
		if errors.Is(err, errTouch) || errors.Is(err, errClip) || errors.Is(err, errNotValid) {
			touching = err
			continue
		}
		return f, err
	}
	return nil, fmt.Errorf("spatial: guard: lattice step %g m: %w; use a coarser lattice", min(a.Density.Step[0], a.Density.Step[1]), touching)
}

// drawOpen does it without a study area.
func drawOpen(a Analysis, s *Isolines, p Policy, proj Projection) (*family, error) {
	m, err := s.measure(a.Counts, a.Weights)
	if err != nil {
		return nil, err
	}
	if len(a.FineCounts.Values) > 0 {
		if err := m.boundFine(s, a.FineCounts); err != nil {
			return nil, err
		}
	}
	f := &family{s: s, m: m, d: s.dissolve(m, p.MinEvents), areas: s.area, grid: make([]gridRing, len(s.rings))}
	for k := range s.levels {
		f.atOr = append(f.atOr, s.outline(f.d.in(func(label int) bool { return label > k })))
	}
	for k := range len(s.levels) + 1 {
		f.equal = append(f.equal, s.outline(f.d.in(func(label int) bool { return label == k && k > 0 })))
	}
	ids := used(append(slices.Clone(f.atOr), f.equal...)...)
	rings := make([]Ring, len(ids))
	for n, id := range ids {
		rings[n] = s.ringXY(int(id), true)
	}
	rounded, err := roundRings(rings, proj)
	if err != nil {
		return nil, err
	}
	if err := checkRings(rounded); err != nil {
		return nil, err
	}
	for n, id := range ids {
		f.grid[id] = rounded[n]
	}
	return f, nil
}

// drawClipped does it within the study area.
func drawClipped(a Analysis, s *Isolines, p Policy, proj Projection) (*family, error) {
	c, err := newClip(s, a.Area)
	if err != nil {
		return nil, err
	}
	m, err := c.measure(a.Density, a.Counts, a.Weights, a.FineCounts, p.Workers)
	if err != nil {
		return nil, err
	}
	f := &family{s: s, c: c, m: m, d: c.dissolve(m, p.MinEvents), areas: c.area}
	add := func(n int, ok func(label int) bool) error {
		var q cutShape
		var err error
		if q.plane, err = c.outline(f.d.in(ok)); err == nil {
			q.shape, err = clippedShape(q.plane, proj)
		}
		f.cut[n] = append(f.cut[n], q)
		return err
	}
	for k := range s.levels {
		if err := add(0, func(label int) bool { return label > k }); err != nil {
			return nil, err
		}
	}
	for k := range len(s.levels) + 1 {
		if err := add(1, func(label int) bool { return label == k && k > 0 }); err != nil {
			return nil, err
		}
	}
	return f, nil
}

// errNotValid reports a shape that the second judge rejects.
var errNotValid = errors.New("shape is not valid")

// clippedShape is ToShape for polygons that end at a border, which may touch
// itself: the judge of validity then has the last word.
func clippedShape(mp MultiPolygon, proj Projection) (orb.MultiPolygon, error) {
	shape, err := toShape(mp, proj, true)
	if err == nil {
		err = checkOGC(shape)
	}
	return shape, err
}

// releaseSurface returns the intensity at the nodes, held within the bands.
func releaseSurface(a Analysis, fams [2]*family, p Policy, proj Projection) Surface {
	f := fams[1]
	if len(a.BandLevels) == 0 {
		f = fams[0]
	}
	out := Surface{Grid: mv.NewGrid(a.Density.Lattice), CRS: proj.CRS()}
	levels := f.s.levels
	scale := a.Total * perKM2
	hold := func(k, lo, hi int, from, to []float64) {
		if k == 0 {
			return
		}
		least, most := levels[k-1]*scale, math.Inf(1)
		if k < len(levels) {
			most = levels[k] * scale
		}
		for i := lo; i < hi; i++ {
			to[i] = min(max(from[i]*scale, least), most)
		}
	}
	if f.c != nil {
		f.c.eachNodeRow(p.Workers, func(j int, changes rowFaces) {
			from, to := a.Density.Values[j*f.s.nx:(j+1)*f.s.nx], out.Values[j*f.s.nx:(j+1)*f.s.nx]
			for i := range to {
				to[i] = math.NaN()
			}
			for n, c := range changes {
				hi := float64(f.s.nx)
				if n+1 < len(changes) {
					hi = changes[n+1].x
				}
				if c.face >= 0 {
					lo, hi := max(0, int(math.Ceil(c.x))), min(f.s.nx, int(math.Ceil(hi)))
					for i := lo; i < hi; i++ {
						to[i] = 0
					}
					hold(int(f.d.label[c.face]), lo, hi, from, to)
				}
			}
		})
		return out
	}
	forChunks(f.s.ny, p.Workers, func(_, lo, hi int) {
		for j := lo; j < hi; j++ {
			from, to := a.Density.Values[j*f.s.nx:], out.Values[j*f.s.nx:]
			f.s.eachRun(j, func(lo, hi int, face int32) { hold(int(f.d.label[face]), lo, hi, from, to) })
		}
	})
	return out
}
