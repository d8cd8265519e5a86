package pipeline

import (
	"context"
	"fmt"
	"math"
	"path/filepath"
	"runtime"
	"runtime/debug"
	"slices"

	"drumlin/bandwidth"
	"drumlin/io/bundle"
	"drumlin/io/events"
	"drumlin/io/geojson"
	"drumlin/io/record"
	"drumlin/io/report"
	"drumlin/mv"
	"drumlin/spatial"
)

func (r *run) openTarget(ctx context.Context) (*bundle.Bundle, error) {
	return bundle.Create(ctx, r.settings.Out, bundle.Options{Replace: r.settings.Replace})
}

func (r *run) selection() (Selection, error) {
	shape, err := bandwidth.ParseShape(r.settings.Shape)
	if err != nil {
		return Selection{}, err
	}
	sel := Selection{Method: r.settings.Bandwidth, Shape: shape}
	if r.settings.Fixed() {
		sel.Method = "fixed"
		m := r.settings.Matrix
		if len(m) == 0 {
			h := r.settings.Scale
			m = []float64{h * h, 0, h * h}
		}
		if sel.Fixed, err = mv.NewBandwidthMatrix(2, []float64{m[0], m[1], m[1], m[2]}); err != nil {
			return sel, err
		}
	}
	return sel, nil
}

// digestJob computes the inputs' digests beside the estimate.
type digestJob struct {
	sources []events.Source
	digests []record.Digest
	err     error
	done    chan struct{}
}

func (r *run) startDigests(ctx context.Context) *digestJob {
	j := &digestJob{sources: r.sources, digests: make([]record.Digest, len(r.sources)), done: make(chan struct{})}
	go func() {
		defer close(j.done)
		for i, s := range r.sources {
			if j.err = ctx.Err(); j.err != nil {
				return
			}
			if j.digests[i], _, j.err = record.FileDigest(s.Info().Name); j.err != nil {
				j.err = &events.Fault{Kind: events.ErrMissing, File: s.Info().Name, What: "the file cannot be read again for its digest", Cause: j.err}
				return
			}
		}
	}()
	return j
}

func (j *digestJob) wait(rows []int64) ([]record.Input, error) {
	<-j.done
	if j.err != nil {
		return nil, j.err
	}
	var out []record.Input
	for i, s := range j.sources {
		info := s.Info()
		out = append(out, record.Input{Path: info.Name, Format: info.Format, Bytes: info.Bytes, Rows: rows[i], Digest: j.digests[i]})
	}
	return byName(out), nil
}

// record fills in everything but the files.
func (r *run) record(in *reading, c *tallied, e *Estimate, rel *spatial.Release, inputs []record.Input) *record.Record {
	s := r.settings
	rec := &record.Record{
		Program:  program(),
		Settings: r.recordedSettings(in),
		Rows:     record.Rows{Read: c.account.Read, Used: c.account.Used - c.tally.Outside(), OutsideExtent: c.tally.Outside()},
		CRS:      record.CRS{Input: in.inputName, Plane: planeRecord(in.plane)},
		Tally: record.Tally{
			Grain: c.tally.Grain(), Step: c.tally.Step(), Events: c.tally.Events(), Weight: c.tally.TotalWeight(),
			EffectiveN: c.tally.EffectiveN(), Nodes: occupied(e.Counts), LeftOutside: c.tally.Outside(),
		},
		Lattice:   record.Lattice{Origin: e.Density.Origin, Step: e.Density.Step, Nodes: e.Density.N},
		Bandwidth: bandwidthRecord(e),
		Regions:   record.Regions{Rule: s.RegionRule, Text: record.RegionRuleText(s.RegionRule), Contents: contents(s.Content)},
		Guard:     guardRecord(rel),
		Warnings:  r.warnings,
		Cautions:  record.Cautions(),
		Inputs:    inputs,
		Workers:   r.workers,
		Times:     record.Times{Started: r.started.UTC(), Stages: r.stages},
	}
	rec.Warnings = slices.Clone(r.warnings)
	for _, reason := range events.Reasons() {
		if n := c.account.SetAside[reason]; n > 0 {
			rec.Rows.SetAside = append(rec.Rows.SetAside, record.SetAside{Reason: reason.String(), Rows: n})
		}
	}
	rec.CRS.Distortion = distortion(in.plane, e.Density.Lattice)
	rec.StudyArea = areaRecord(in.area, e)
	return rec
}

// baseName is a file's name without its folder, "" for none.
func baseName(path string) string {
	if path == "" {
		return ""
	}
	return filepath.Base(path)
}

func contents(perCent []float64) []float64 {
	out := slices.Sorted(slices.Values(perCent))
	for i := range out {
		out[i] /= 100
	}
	return out
}

func (r *run) recordedSettings(in *reading) record.Settings {
	s := r.settings
	out := record.Settings{
		{Name: "x", Value: in.x}, {Name: "y", Value: in.y}, {Name: "crs", Value: in.inputName}, {Name: "work-crs", Value: s.WorkCRS},
		{Name: "weight", Value: s.Weight}, {Name: "bandwidth", Value: s.Bandwidth}, {Name: "shape", Value: s.Shape},
	}
	if len(s.Matrix) > 0 {
		out = append(out, record.Setting{Name: "matrix", Value: s.Matrix})
	}
	if s.Scale != 0 {
		out = append(out, record.Setting{Name: "scale", Value: s.Scale})
	}
	if s.Context != "" {
		out = append(out, record.Setting{Name: "context", Value: filepath.Base(s.Context)})
	}
	return append(out, record.Settings{
		{Name: "content", Value: slices.Sorted(slices.Values(s.Content))}, {Name: "bands", Value: s.Bands}, {Name: "band-content", Value: slices.Sorted(slices.Values(s.BandContent))}, {Name: "lattice", Value: s.Lattice},
		{Name: "study-area", Value: baseName(s.StudyArea)}, {Name: "edge", Value: s.Edge}, {Name: "zones", Value: baseName(s.Zones)},
		{Name: "region-rule", Value: s.RegionRule}, {Name: "min-events", Value: s.MinEvents}, {Name: "sensitivity", Value: s.Sensitivity}, {Name: "formats", Value: s.Formats},
	}...)
}

func bandwidthRecord(e *Estimate) record.Bandwidth {
	c := e.Choice
	ell := c.Matrix.Ellipse()
	b := record.Bandwidth{
		Method: c.Method, Shape: c.Shape.String(), Kernel: mv.Gaussian.String(), Stages: c.Stages,
		Matrix: c.Matrix.Entries(), MatrixHex: record.HexFloats(c.Matrix.Entries()),
		Major: ell.Major, Minor: ell.Minor, Bearing: ell.Bearing,
		Status: c.Status.String(), Evaluations: c.Evaluations, Notes: c.Notes,
		StepsPerMinorScale: e.StepsPerScale, LatticeError: e.LatticeError,
	}
	if c.Method == "fixed" {
		b.Status = "fixed"
	}
	if c.Method != "fixed" && c.Status != bandwidth.Closed {
		b.Criterion = &c.Criterion
	}
	if c.Bias2 > 0 {
		b.AMISE = &record.AMISE{SquaredBias: c.Bias2, Variance: c.Variance}
	}
	for i, p := range c.Pilots {
		b.Pilots = append(b.Pilots, record.Pilot{Stage: i + 1, Order: p.Order, Matrix: p.Matrix.Entries(), MatrixHex: record.HexFloats(p.Matrix.Entries())})
	}
	b.Pilots = append(b.Pilots, record.Pilot{
		Stage: len(c.Pilots) + 1, Order: 2, Matrix: e.BiasPilot.Matrix.Entries(), MatrixHex: record.HexFloats(e.BiasPilot.Matrix.Entries()),
		Note: "for the second derivatives behind the smoothing bias, which it still understates at sharp peaks",
	})
	return b
}

func guardRecord(rel *spatial.Release) record.Guard {
	w := rel.Withheld()
	g := record.Guard{
		MinEvents: w.MinEvents, RegionParts: w.RegionParts, RegionHoles: w.RegionHoles,
		BandParts: w.BandParts, BandHoles: w.BandHoles, Peaks: w.Peaks, RegionsWithheld: w.Regions,
		Zones: w.Zones, ZonesComplement: w.ZonesComplement,
	}
	if b := rel.Bands(); len(b) > 0 {
		g.FloorPerKM2 = roundTo(b[0].FromPerKM2, 9)
	}
	return g
}

func planeRecord(p spatial.Projection) record.Plane {
	c := p.CRS()
	return record.Plane{ID: c.ID, Name: c.Name, Method: c.Method, Ellipsoid: c.Ellipsoid, Lat0: c.Lat0, Lon0: c.Lon0, Lat1: c.Lat1, Lat2: c.Lat2, K0: c.K0, FE: c.FE, FN: c.FN, EqualArea: p.EqualArea()}
}

// distortion bounds the plane's distortion over the lattice: at its corners,
// the middles of its sides and its centre.
func distortion(p spatial.Projection, l mv.Lattice) *record.Distortion {
	if p.CRS().Method == "plane" {
		return nil
	}
	d := &record.Distortion{ScaleLeast: math.Inf(1), AreaLeast: math.Inf(1)}
	for _, fx := range []float64{0, 0.5, 1} {
		for _, fy := range []float64{0, 0.5, 1} {
			x, y := l.Coord(0, 0)+fx*l.Step[0]*float64(l.N[0]-1), l.Coord(1, 0)+fy*l.Step[1]*float64(l.N[1]-1)
			q := p.Inverse(spatial.XYs{X: []float64{x}, Y: []float64{y}})
			t := spatial.Distortion(p, spatial.LonLat{Lon: q.Lon[0], Lat: q.Lat[0]})
			if math.IsNaN(t.MaxScale) {
				continue
			}
			d.ScaleLeast, d.ScaleGreatest = min(d.ScaleLeast, t.MinScale), max(d.ScaleGreatest, t.MaxScale)
			d.AreaLeast, d.AreaGreatest = min(d.AreaLeast, t.AreaScale), max(d.AreaGreatest, t.AreaScale)
			d.Angle = max(d.Angle, t.Angular)
		}
	}
	if math.IsInf(d.ScaleLeast, 0) {
		return nil
	}
	return d
}

func occupied(g mv.Grid) (n int64) {
	for _, v := range g.Values {
		if v != 0 {
			n++
		}
	}
	return n
}

// program says what made the bundle, from the build information.
func program() record.Program {
	p := record.Program{Name: "drumlin", Version: Version, Go: runtime.Version()}
	if b, ok := debug.ReadBuildInfo(); ok {
		for _, kv := range b.Settings {
			if kv.Key == "vcs.revision" {
				p.Commit = kv.Value
			}
		}
		for _, d := range b.Deps {
			switch d.Path {
			case "gonum.org/v1/gonum", "github.com/paulmach/orb", "github.com/apache/arrow/go/v17", "github.com/peterstace/simplefeatures":
				p.Dependencies = append(p.Dependencies, record.Dependency{Module: d.Path, Version: d.Version})
			}
		}
	}
	return p
}

// Version is the program's own.
const Version = "0.1.0"

// write puts the release and the record into the bundle and publishes it.
func (r *run) write(ctx context.Context, b *bundle.Bundle, rel *spatial.Release, rec *record.Record, page report.Page) error {
	meta := geojson.Meta{Weighted: r.settings.Weight != "", Caution: record.Caution}
	if r.settings.Weight != "" {
		meta.Unit = "weight per km2"
	}
	err := r.timed("write", func() error {
		for _, f := range r.outputs(ctx, rel, page.Projection, meta) {
			if !slices.Contains(r.settings.Formats, f.format) {
				continue
			}
			w, err := b.File(f.name)
			if err != nil {
				return err
			}
			n := note(w)
			if err := f.write(n); err != nil {
				_ = w.Close() // the first error is the one to tell
				return fmt.Errorf("%s: %w", f.name, err)
			}
			if err := w.Close(); err != nil {
				return err
			}
			page.Files = append(page.Files, n.file(f.name))
		}
		return nil
	})
	if err != nil {
		return err
	}
	var picture []byte
	err = r.timed("report", func() (err error) { picture, err = r.writeReport(b, page); return err })
	if err != nil {
		return err
	}
	rec.Times.Stages = r.stages
	rec.Times.Finished = r.clock().UTC()
	if err := b.Commit(rec); err != nil {
		return err
	}
	return r.writePicture(ctx, picture)
}
