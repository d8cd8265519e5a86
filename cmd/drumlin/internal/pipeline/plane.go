package pipeline

import (
	"context"
	"errors"
	"fmt"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/io/events"
	"drumlin/spatial"
)

// reading is how the columns of all sources are read and projected.
type reading struct {
	x, y, weight string
	input        spatial.CRSRef // of the coordinates
	inputName    string
	plane        spatial.Projection // of the estimate
	reproject    bool               // input is projected, but not on the plane of the estimate
	extent       extent             // of the raw coordinates; known for a plane without a place
	warnings     []string
	area         *areaFile // nil without a study area
}

func (r *reading) columns() []string {
	if r.weight != "" {
		return []string{r.x, r.y, r.weight}
	}
	return []string{r.x, r.y}
}

func (r *reading) screen() events.Screen {
	s := events.Screen{Kind: events.Planar, Weighted: r.weight != ""}
	if r.input.Geographic {
		s.Kind = events.Geographic
	}
	return s
}

// project turns screened coordinates into metres on the plane of the estimate,
// in place. Positions outside a projection's domain become NaN.
func (r *reading) project(x, y []float64) spatial.XYs {
	if r.input.Geographic {
		return r.plane.Forward(spatial.LonLats{Lon: x, Lat: y})
	}
	if r.reproject {
		return r.plane.Forward(r.input.Projection.Inverse(spatial.XYs{X: x, Y: y}))
	}
	return spatial.XYs{X: x, Y: y}
}

// resolve settles columns and CRS; the plane of the estimate follows in
// choosePlane.
func resolve(s *config.Settings, sources []events.Source) (*reading, error) {
	r := &reading{weight: s.Weight}
	for i, src := range sources {
		pair, err := events.Resolve(s.X, s.Y, "", src.Fields())
		if err == nil && s.Weight != "" {
			err = events.CheckNumeric(s.Weight, src.Fields())
		}
		if err != nil {
			return nil, inFile(err, src)
		}
		if i > 0 && (pair.X != r.x || pair.Y != r.y) {
			return nil, inFile(&events.Fault{Kind: events.ErrSetting, What: fmt.Sprintf("its coordinate columns are %s and %s, those of %s are %s and %s", pair.X, pair.Y, sources[0].Info().Name, r.x, r.y), Remedy: "name them with --x and --y, or map the files apart"}, src)
		}
		r.x, r.y = pair.X, pair.Y
		if pair.Swapped {
			r.warnings = append(r.warnings, fmt.Sprintf("--x %s and --y %s look swapped: x is the longitude", pair.X, pair.Y))
		}
		crs, err := inputCRS(s.CRS, pair, src)
		if err != nil {
			return nil, err
		}
		if i > 0 && crs != r.inputName {
			return nil, inFile(&events.Fault{Kind: events.ErrSetting, What: fmt.Sprintf("its CRS is %s, that of %s is %s", crs, sources[0].Info().Name, r.inputName), Remedy: "map the files apart, or state one CRS with --crs"}, src)
		}
		r.inputName = crs
	}
	ref, err := spatial.ParseCRS(r.inputName)
	if err != nil {
		return nil, fmt.Errorf("--crs: %w", err)
	}
	r.input = ref
	return r, nil
}

func inputCRS(asked string, pair events.Pair, src events.Source) (string, error) {
	switch own := src.Info().CRS; {
	case asked != "":
		return asked, nil
	case own != "":
		return own, nil
	case pair.Degrees:
		return "EPSG:4326", nil
	}
	return "", inFile(&events.Fault{Kind: events.ErrSetting, What: fmt.Sprintf("the CRS of columns %s and %s is not known", pair.X, pair.Y), Remedy: "state it with --crs EPSG:n, or --crs plane for metres without a place"}, src)
}

// inFile names the file in a fault that lacks it.
func inFile(err error, src events.Source) error {
	var f *events.Fault
	if errors.As(err, &f) && f.File == "" {
		c := *f
		c.File = src.Info().Name
		return &c
	}
	return err
}

// choosePlane settles the plane of the estimate: the one asked for; metres
// without a place as they are; an equal-area input plane as it is; else
// Lambert's equal-area projection centred on the study area or the events, to
// whole degrees.
func (r *reading) choosePlane(ctx context.Context, s *config.Settings, sources []events.Source, w *pool) error {
	if r.input.Plane {
		if s.WorkCRS != "auto" && s.WorkCRS != "plane" {
			return fmt.Errorf("%w: work-crs %s does not go with coordinates without a place (--crs plane)", config.ErrSettings, s.WorkCRS)
		}
		r.plane = r.input.Projection
		var ok bool
		if r.extent, ok = r.stated(sources); ok {
			return nil
		}
		l, err := r.look(ctx, sources, w, false)
		if err != nil {
			return err
		}
		r.extent = l.extent
		return nil
	}
	if s.WorkCRS != "auto" {
		ref, err := spatial.ParseCRS(s.WorkCRS)
		if err != nil {
			return fmt.Errorf("--work-crs: %w", err)
		}
		if ref.Projection == nil || ref.Plane {
			return fmt.Errorf("%w: work-crs %s is no plane in metres; give a projected CRS or auto", config.ErrSettings, s.WorkCRS)
		}
		r.plane = ref.Projection
		if !r.plane.EqualArea() {
			r.warnings = append(r.warnings, fmt.Sprintf("%s is not equal-area: intensities per square kilometre are off by its area scale", ref.CRS.Name))
		}
	} else if !r.input.Geographic && r.input.Projection.EqualArea() {
		r.plane = r.input.Projection
	}
	if r.plane != nil {
		r.reproject = !r.input.Geographic && r.plane.CRS() != r.input.CRS
		return nil
	}
	centre, err := r.centre(ctx, sources, w)
	if err != nil {
		return err
	}
	r.plane = spatial.AutoPlane(centre.Lon, centre.Lat)
	r.reproject = !r.input.Geographic
	return nil
}

// centre comes from the extent of the coordinates where that is narrow, else
// from a first pass over them. Whether the extent is that of the files'
// statistics or, where one lacks them, that of a first pass makes no difference.
func (r *reading) centre(ctx context.Context, sources []events.Source, w *pool) (spatial.LonLat, error) {
	if r.area != nil {
		return spatial.AreaCentre(r.area.shape), nil
	}
	choose := func(e extent) (spatial.LonLat, bool) {
		if !r.input.Geographic {
			return spatial.LonLat{}, false
		}
		return spatial.ChooseCentre(e.lo[0], e.hi[0], e.lo[1], e.hi[1])
	}
	e, stated := r.stated(sources)
	if stated {
		if c, ok := choose(e); ok {
			return c, nil
		}
	}
	l, err := r.look(ctx, sources, w, true)
	if err != nil {
		return spatial.LonLat{}, err
	}
	if !stated {
		if c, ok := choose(l.extent); ok {
			return c, nil
		}
	}
	c, ok := l.counter.Centre()
	if !ok {
		return c, fmt.Errorf("%w: %s", ErrNoEvents, reasonsText(l.account))
	}
	return c, nil
}
