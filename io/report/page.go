package report

import (
	"errors"
	"fmt"

	"drumlin/io/record"
	"drumlin/spatial"
)

// Page is what a report is made from. Record, Release and Projection are
// needed; every other field may be left out, and its section then is. A Page
// is only read.
type Page struct {
	Record     *record.Record
	Release    *spatial.Release
	Projection spatial.Projection // the plane of the release, for the graticule

	Title string // of the page; default: a plain sentence
	Unit  string // what is counted: "events" (default) or "weight"

	Period       *Period
	StudyArea    spatial.MultiPolygon // metres
	Context      [][]spatial.XY       // lines drawn beneath, metres; never part of the estimate
	Alternatives []Alternative        // regions at other multiples of H
	Choices      []Choice             // what each selector says; default: the record's bandwidth alone
	Profile      *Profile             // the criterion along c·H; default: from the record's AMISE
	Stability    []Stability
	Files        []record.File // the bundle's files with digests; default: the record's
}

// Period is when the events happened.
type Period struct {
	From, Until string // as the record writes them
	Through     bool   // Until is the time of the last event, not the end of a window
	Zone        string // time zone
}

// to joins the two ends.
func (p *Period) to() string {
	if p.Through {
		return " to "
	}
	return " until before "
}

// Alternative is what the map would show at Factor times H.
type Alternative struct {
	Factor  float64
	Regions []spatial.Region // released by the guard, like the others
	Note    string           // why there are none, or what is to be known about them
}

// Choice is what one selector says.
type Choice struct {
	Method, Shape       string
	Major, Minor        float64 // scales, metres
	Bearing             float64 // of the major axis, degrees clockwise from plane north
	Criterion           float64 // 0: none
	SquaredBias         float64 // estimated, of the error at this matrix; 0 with Variance: not known
	Variance            float64
	Status              string
	Evaluations         int
	Used                bool // this one drew the map
	Notes               []string
	EstimatedErrorRatio float64 // estimated error over that of the one used; 0: not known
}

// Profile is a criterion along c·H.
type Profile struct {
	Name            string
	Factors, Values []float64
}

// Stability is an interval for one number of the map from repeated estimates.
type Stability struct {
	What      string // "area of the 50 % region, km2"
	Value     float64
	Low, High float64
	Share     float64 // of repetitions within, 0.9
	How       string  // "200 resamples of the tally"
}

// ErrIncomplete: a page without record, release or projection.
var ErrIncomplete = errors.New("report: page incomplete")

func (p *Page) validate() error {
	switch {
	case p.Record == nil:
		return fmt.Errorf("%w: no record", ErrIncomplete)
	case p.Release == nil:
		return fmt.Errorf("%w: no release", ErrIncomplete)
	case p.Projection == nil:
		return fmt.Errorf("%w: no projection", ErrIncomplete)
	case len(p.Release.Regions()) == 0 && len(p.Release.Bands()) == 0:
		return fmt.Errorf("%w: the release holds neither regions nor bands", ErrIncomplete)
	case p.Profile != nil && len(p.Profile.Factors) != len(p.Profile.Values):
		return fmt.Errorf("report: profile of %d factors and %d values", len(p.Profile.Factors), len(p.Profile.Values))
	}
	return nil
}

// title returns the page's heading.
func (p *Page) title() string {
	if p.Title != "" {
		return p.Title
	}
	if p.counted() == "weight" {
		return "Where the weight of recorded events concentrates"
	}
	return "Where recorded events concentrate"
}

// counted returns what intensities count.
func (p *Page) counted() string {
	if p.Unit != "" {
		return shown(p.Unit)
	}
	if v, ok := p.Record.Settings.Get("weight"); ok && v != "" {
		return "weight"
	}
	return "events"
}

// placeless reports a plane without a place: no degrees, no north.
func (p *Page) placeless() bool { return p.Projection.CRS().Method == "plane" }
