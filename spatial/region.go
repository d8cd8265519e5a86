package spatial

import (
	"cmp"
	"math"
	"slices"

	"github.com/paulmach/orb"
)

// addRegions builds the released regions in rising content.
func (r *Release) addRegions(a Analysis, f *family, levels []float64, proj Projection) error {
	rising := slices.Clone(a.Regions)
	slices.SortStableFunc(rising, func(x, y Threshold) int { return cmp.Compare(x.Content, y.Content) })
	for _, t := range rising {
		k, _ := slices.BinarySearch(levels, t.Density)
		if !f.adds(k) {
			r.withheld.Regions = append(r.withheld.Regions, t.Content)
			continue
		}
		in := f.d.in(func(label int) bool { return label > k })
		out := Region{Content: t.Content, Rule: a.RegionRule, ThresholdPerKM2: f.s.levels[k] * a.Total * perKM2}
		out.Mass, out.Events, out.Weight = f.m.union(in)
		area := f.area(in)
		out.AreaKM2 = area / perKM2
		out.MeanPerKM2 = a.Total * out.Mass / area * perKM2
		if a.Events > 0 {
			out.EventShare = out.Events.Estimate / a.Events
		}
		var err error
		if out.Plane, out.Shape, err = f.above(k, proj); err != nil {
			return err
		}
		if !proj.EqualArea() {
			out.AreaKM2 = EllipsoidArea(out.Shape) / perKM2
		}
		r.regions = append(r.regions, out)
		f.kept = append(f.kept, k)
	}
	return nil
}

// addBands builds the released bands in rising intensity.
func (r *Release) addBands(a Analysis, f *family, proj Projection) error {
	for k := 1; k <= len(f.s.levels); k++ {
		if !f.adds(k - 1) {
			continue
		}
		in := f.d.in(func(label int) bool { return label == k })
		out := Band{FromPerKM2: f.s.levels[k-1] * a.Total * perKM2, ToPerKM2: math.Inf(1)}
		if k < len(f.s.levels) {
			out.ToPerKM2 = f.s.levels[k] * a.Total * perKM2
		}
		out.Mass, out.Events, _ = f.m.union(in)
		out.AreaKM2 = f.area(in) / perKM2
		var err error
		if out.Plane, out.Shape, err = f.between(k, proj); err != nil {
			return err
		}
		if !proj.EqualArea() {
			out.AreaKM2 = EllipsoidArea(out.Shape) / perKM2
		}
		r.bands = append(r.bands, out)
	}
	return nil
}

// smallShape is the number of positions up to which a shape is always judged a
// second time; larger ones only where the lattice comes near the rounding.
const smallShape = 4000

// shape assembles an outline. That no two rings meet was checked exactly when
// they were rounded; the second judge also sees to what lies inside what.
func (f *family) shape(o outline, proj Projection) (orb.MultiPolygon, error) {
	mp, err := assemble(o, f.grid, proj)
	if err != nil {
		return nil, err
	}
	var n int
	for _, p := range mp {
		for _, r := range p {
			n += len(r)
		}
	}
	if fine := f.s.opt.Clamp*min(f.s.g.Step[0], f.s.g.Step[1]) < 0.03; n <= smallShape || fine {
		if err := checkOGC(mp); err != nil {
			return nil, err
		}
	}
	return mp, nil
}

// above returns where the released label is above level k.
func (f *family) above(k int, proj Projection) (MultiPolygon, orb.MultiPolygon, error) {
	if f.c != nil {
		return f.cut[0][k].plane, f.cut[0][k].shape, nil
	}
	shape, err := f.shape(f.atOr[k], proj)
	return f.s.polygons(f.atOr[k]), shape, err
}

// between returns where the released label is k.
func (f *family) between(k int, proj Projection) (MultiPolygon, orb.MultiPolygon, error) {
	if f.c != nil {
		return f.cut[1][k].plane, f.cut[1][k].shape, nil
	}
	shape, err := f.shape(f.equal[k], proj)
	return f.s.polygons(f.equal[k]), shape, err
}

// adds reports whether any face has just the label above level k, so that the
// region there holds more than the next smaller one.
func (f *family) adds(k int) bool { return slices.Contains(f.d.label, uint8(k+1)) }

// area adds up the faces of a set, square metres.
func (f *family) area(in func(face int32) bool) float64 {
	var sum float64
	for n, v := range f.areas {
		if in(int32(n)) {
			sum += v
		}
	}
	return sum
}

// labelAt returns the released label at a position.
func (f *family) labelAt(at XY) int {
	if f.c == nil {
		return int(f.d.label[f.s.Locate(at)])
	}
	if face := f.c.locate(at); face >= 0 {
		return int(f.d.label[face])
	}
	return 0
}

// addPeaks keeps the peaks that rest on enough events and lie in something
// released, ranked by intensity.
func (r *Release) addPeaks(a Analysis, fams [2]*family, p Policy, proj Projection) {
	for _, t := range a.Peaks {
		effective := a.Events * t.Density / a.KernelAtZero
		if t.Inside > 0 {
			effective *= t.Inside
		}
		region, band := fams[0].labelAt(t.At), fams[1].labelAt(t.At)
		if !(effective >= p.MinEvents) || region+band == 0 && len(a.Regions)+len(a.BandLevels) > 0 {
			r.withheld.Peaks++
			continue
		}
		out := Peak{
			At:                  t.At,
			IntensityPerKM2:     a.Total * t.Density * perKM2,
			StandardErrorPerKM2: a.Total * t.StandardError * perKM2,
			SmoothingBiasPerKM2: a.Total * t.SmoothingBias * perKM2,
			DebiasedPerKM2:      a.Total * (t.Density - t.SmoothingBias) * perKM2,
			EffectiveEvents:     effective,
		}
		if n := slices.IndexFunc(fams[0].kept, func(k int) bool { return region > k }); n >= 0 {
			out.Region = r.regions[n].Content // rising content, so the first is the smallest
		}
		out.Position = position(t.At, proj)
		r.peaks = append(r.peaks, out)
	}
	slices.SortStableFunc(r.peaks, func(x, y Peak) int { return cmp.Compare(y.IntensityPerKM2, x.IntensityPerKM2) })
	for n := range r.peaks {
		r.peaks[n].Rank = n + 1
	}
}

// position returns degrees rounded to seven decimals within [-180, 180], or
// metres rounded to a millimetre on a plane without a place.
func position(at XY, proj Projection) LonLat {
	if proj.CRS().Method == "plane" {
		return LonLat{math.Round(at.X*metreUnits) / metreUnits, math.Round(at.Y*metreUnits) / metreUnits}
	}
	ll := proj.Inverse(XYs{X: []float64{at.X}, Y: []float64{at.Y}})
	g := roundDegrees(LonLat{math.Remainder(ll.Lon[0], 360), ll.Lat[0]})
	return LonLat{float64(g.x) / degreeUnits, float64(g.y) / degreeUnits}
}
