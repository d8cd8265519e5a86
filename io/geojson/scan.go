package geojson

import (
	"fmt"
	"math"
	"strconv"

	"github.com/paulmach/orb"
)

// scanner walks a coordinates value. The bytes are valid JSON already (the
// value came out of encoding/json), so only its shape is checked: null or text
// in place of a number does not pass, as it would with plain unmarshalling.
type scanner struct {
	data []byte
	i    int
	r    *polygonReader
}

func (s *scanner) space() {
	for s.i < len(s.data) && (s.data[s.i] == ' ' || s.data[s.i] == '\n' || s.data[s.i] == '\r' || s.data[s.i] == '\t') {
		s.i++
	}
}

// next returns the next byte that is not white space, 0 at the end.
func (s *scanner) next() byte {
	s.space()
	if s.i >= len(s.data) {
		return 0
	}
	return s.data[s.i]
}

// list reads an array and calls item at each element; what names the elements
// in errors.
func (s *scanner) list(what string, item func() error) error {
	if s.next() != '[' {
		return fmt.Errorf("coordinates: no array of %ss where one is needed: %w", what, ErrMalformed)
	}
	s.i++
	if s.next() == ']' {
		s.i++
		return nil
	}
	for n := 1; ; n++ {
		if err := item(); err != nil {
			return fmt.Errorf("%s %d: %w", what, n, err)
		}
		switch s.next() {
		case ',':
			s.i++
		case ']':
			s.i++
			return nil
		default:
			return fmt.Errorf("%s %d: neither an array nor a number follows: %w", what, n, ErrMalformed)
		}
	}
}

// polygon reads one polygon, nil when it has no rings.
func (s *scanner) polygon() (orb.Polygon, error) {
	var poly orb.Polygon
	first := true
	err := s.list("ring", func() error {
		ring, err := s.ring()
		if err != nil {
			return err
		}
		a := signedArea(ring)
		switch {
		case a == 0 && first:
			return fmt.Errorf("an exterior ring without area: %w", ErrMalformed)
		case a == 0:
			return nil
		case a > 0 != first:
			ring.Reverse()
		}
		first = false
		poly = append(poly, ring)
		return nil
	})
	return poly, err
}

func (s *scanner) ring() (orb.Ring, error) {
	var ring orb.Ring
	err := s.list("position", func() error {
		p, err := s.position()
		ring = append(ring, p)
		return err
	})
	if err != nil {
		return nil, err
	}
	if len(ring) < 4 {
		return nil, fmt.Errorf("%d positions; a ring needs 4, the first repeated at the end: %w", len(ring), ErrMalformed)
	}
	if ring[0] != ring[len(ring)-1] {
		return nil, fmt.Errorf("the ring is open: its last position must repeat the first: %w", ErrMalformed)
	}
	return ring, nil
}

func (s *scanner) position() (orb.Point, error) {
	if s.r.left--; s.r.left < 0 {
		return orb.Point{}, fmt.Errorf("more than %d positions in all: %w", s.r.opt.MaxPositions, ErrTooLarge)
	}
	var p orb.Point
	n := 0
	if s.next() != '[' {
		return p, fmt.Errorf("not an array of numbers: %w", ErrMalformed)
	}
	for {
		s.i++ // the bracket or the comma
		v, ok := s.number()
		if !ok {
			return p, fmt.Errorf("not a finite number: %w", ErrMalformed)
		}
		if n < 2 {
			p[n] = v
		}
		n++
		switch s.next() {
		case ',':
			continue
		case ']':
			s.i++
		default:
			return p, fmt.Errorf("not a number: %w", ErrMalformed)
		}
		break
	}
	if n < 2 {
		return p, fmt.Errorf("one number where two are needed: %w", ErrMalformed)
	}
	if !s.r.opt.Plane && (math.Abs(p[0]) > 360 || math.Abs(p[1]) > 90) {
		return p, fmt.Errorf("(%g, %g) is not longitude and latitude in degrees; convert the file, or swap its axes: %w", p[0], p[1], ErrUnsupported)
	}
	return p, nil
}

func (s *scanner) number() (float64, bool) {
	s.space()
	from := s.i
	for s.i < len(s.data) {
		if c := s.data[s.i]; c >= '0' && c <= '9' || c == '-' || c == '+' || c == '.' || c == 'e' || c == 'E' {
			s.i++
			continue
		}
		break
	}
	v, err := strconv.ParseFloat(string(s.data[from:s.i]), 64)
	return v, err == nil
}

// signedArea is positive for an anticlockwise closed ring, taken about its
// first position.
func signedArea(r orb.Ring) float64 {
	var a float64
	o := r[0]
	for i := 1; i+1 < len(r); i++ {
		a += (r[i][0]-o[0])*(r[i+1][1]-o[1]) - (r[i+1][0]-o[0])*(r[i][1]-o[1])
	}
	return a / 2
}
