package geojson

import (
	"encoding/json"
	"io"
	"math"
	"strconv"

	"drumlin/spatial"
)

// encoder appends JSON to a buffer and passes it on when it is full.
type encoder struct {
	w        io.Writer
	b        []byte
	err      error // first error, kept
	first    bool  // no member of the current object yet
	decimals int
}

const full = 1 << 15

func (e *encoder) flush() error {
	if e.err == nil && len(e.b) > 0 {
		_, e.err = e.w.Write(e.b)
	}
	e.b = e.b[:0]
	return e.err
}

func (e *encoder) raw(s string) { e.b = append(e.b, s...) }

// quoted writes a JSON string.
func (e *encoder) quoted(s string) {
	q, _ := json.Marshal(s) // a string always marshals
	e.b = append(e.b, q...)
}

// key starts a member of the current object; names need no escapes.
func (e *encoder) key(name string) {
	if !e.first {
		e.b = append(e.b, ',')
	}
	e.first = false
	e.b = append(e.b, '"')
	e.b = append(e.b, name...)
	e.b = append(e.b, '"', ':')
}

func (e *encoder) text(name, s string) {
	e.key(name)
	e.quoted(s)
}

// number writes a measured value with 7 significant digits.
func (e *encoder) number(name string, v float64) {
	e.key(name)
	e.significant(v, 7)
}

// exact writes a value that was chosen, not measured.
func (e *encoder) exact(name string, v float64) {
	e.key(name)
	e.significant(v, 17)
}

// count writes the number of events and its bounds as whole numbers; the
// bounds are rounded outward, but for a residue of floating point.
func (e *encoder) count(c spatial.Count) {
	const residue = 1e-6
	if math.IsNaN(c.Estimate) { // withheld
		for _, name := range []string{"events", "events_min", "events_max"} {
			e.key(name)
			e.raw("null")
		}
		return
	}
	e.exact("events", math.Round(c.Estimate))
	e.exact("events_min", max(0, math.Floor(c.Min+residue)))
	e.exact("events_max", math.Ceil(c.Max-residue))
}

// significant writes v rounded to so many significant digits, null when JSON
// has no form for it.
func (e *encoder) significant(v float64, digits int) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		e.raw("null")
		return
	}
	if v == 0 {
		e.raw("0") // not -0
		return
	}
	if digits < 17 {
		var tmp [32]byte
		v, _ = strconv.ParseFloat(string(strconv.AppendFloat(tmp[:0], v, 'e', digits-1, 64)), 64)
	}
	format := byte('f')
	if a := math.Abs(v); a < 1e-6 || a >= 1e15 {
		format = 'e'
	}
	e.b = strconv.AppendFloat(e.b, v, format, -1, 64)
}

// ring writes a closed ring.
func (e *encoder) ring(r []pos) {
	e.b = append(e.b, '[')
	for i, p := range r {
		if i > 0 {
			e.b = append(e.b, ',')
		}
		e.position(p)
	}
	e.b = append(e.b, ']')
}

func (e *encoder) position(p pos) {
	e.b = append(e.b, '[')
	e.b = appendQuanta(e.b, p.x, e.decimals)
	e.b = append(e.b, ',')
	e.b = appendQuanta(e.b, p.y, e.decimals)
	e.b = append(e.b, ']')
	if len(e.b) > full {
		_ = e.flush() // the error stays in the encoder
	}
}

func (e *encoder) quanta(q int64) { e.b = appendQuanta(e.b, q, e.decimals) }

var pow10 = [...]uint64{1, 10, 100, 1000, 10000, 100000, 1000000, 10000000}

// appendQuanta writes q * 10^-decimals, without trailing zeros or exponent.
func appendQuanta(b []byte, q int64, decimals int) []byte {
	u := uint64(q)
	if q < 0 {
		b = append(b, '-')
		u = -u
	}
	whole, frac := u/pow10[decimals], uint32(u%pow10[decimals])
	b = strconv.AppendUint(b, whole, 10)
	if frac == 0 {
		return b
	}
	var d [8]byte
	for i := decimals; i > 0; i-- {
		d[i] = byte('0' + frac%10)
		frac /= 10
	}
	d[0] = '.'
	n := decimals
	for d[n] == '0' {
		n--
	}
	return append(b, d[:n+1]...)
}
