package events

import (
	"math"
	"time"
)

// ParseTime reads a date or a time as ISO 8601 writes them: 2025-03-01,
// 2025-03-01T12:30, with a blank for the T, seconds and their fraction, and an
// offset (Z, +01, +0100 or +01:00). It returns microseconds since 1970, in UTC
// where an offset is given, else on a clock whose zone is not told; a fraction
// is cut to microseconds.
func ParseTime(s string) (micros float64, utc, ok bool) {
	p := scanner{s: s}
	year := p.digits(4)
	p.want('-')
	month := p.digits(2)
	p.want('-')
	day := p.digits(2)
	if p.bad || month < 1 || month > 12 || day < 1 || day > daysIn(year, month) {
		return 0, false, false
	}
	total := daysSince1970(year, month, day) * 86400
	if p.end() {
		return float64(total) * 1e6, false, true
	}
	if c := p.next(); c != 'T' && c != 't' && c != ' ' {
		return 0, false, false
	}
	hour := p.digits(2)
	p.want(':')
	minute := p.digits(2)
	second, fraction := 0, 0.0
	if p.take(':') {
		second = p.digits(2)
		if p.take('.') || p.take(',') {
			fraction = p.fraction()
		}
	}
	offset := 0
	switch {
	case p.end():
	case p.take('Z') || p.take('z'):
		utc = true
	default:
		sign := 0
		switch {
		case p.take('+'):
			sign = 1
		case p.take('-'):
			sign = -1
		}
		h, m := p.digits(2), 0
		if p.take(':') || !p.end() {
			m = p.digits(2)
		}
		if sign == 0 || h > 18 || m > 59 {
			return 0, false, false
		}
		utc, offset = true, sign*(h*3600+m*60)
	}
	if p.bad || !p.end() || hour > 23 || minute > 59 || second > 59 {
		return 0, false, false
	}
	total += int64(hour*3600 + minute*60 + second - offset)
	return float64(total)*1e6 + fraction, utc, true
}

// scanner takes digits and marks from a text; bad stays set once it is.
type scanner struct {
	s   string
	i   int
	bad bool
}

func (p *scanner) end() bool { return p.i >= len(p.s) }

func (p *scanner) next() byte {
	if p.end() {
		p.bad = true
		return 0
	}
	p.i++
	return p.s[p.i-1]
}

func (p *scanner) take(c byte) bool {
	if p.end() || p.s[p.i] != c {
		return false
	}
	p.i++
	return true
}

func (p *scanner) want(c byte) {
	if !p.take(c) {
		p.bad = true
	}
}

func (p *scanner) digits(n int) int {
	v := 0
	for range n {
		c := p.next()
		if c < '0' || c > '9' {
			p.bad = true
			return 0
		}
		v = v*10 + int(c-'0')
	}
	return v
}

// fraction reads digits after the point as whole microseconds.
func (p *scanner) fraction() float64 {
	v, unit, n := 0.0, 1e5, 0
	for ; !p.end() && p.s[p.i] >= '0' && p.s[p.i] <= '9'; n++ {
		if n < 6 {
			v += float64(p.s[p.i]-'0') * unit
			unit /= 10
		}
		p.i++
	}
	if n == 0 {
		p.bad = true
	}
	return math.Round(v)
}

func daysIn(year, month int) int {
	switch month {
	case 4, 6, 9, 11:
		return 30
	case 2:
		if year%4 == 0 && (year%100 != 0 || year%400 == 0) {
			return 29
		}
		return 28
	}
	return 31
}

// daysSince1970 counts days in the Gregorian calendar, years from March.
func daysSince1970(year, month, day int) int64 {
	y, m := int64(year), int64(month)
	if m <= 2 {
		y--
		m += 12
	}
	era := y / 400
	if y < 0 {
		era = (y - 399) / 400
	}
	inEra := y - era*400
	inYear := (153*(m-3)+2)/5 + int64(day) - 1
	return era*146097 + inEra*365 + inEra/4 - inEra/100 + inYear - 719468
}

// Moment is a point in time as columns of both kinds hold it.
type Moment struct {
	UTC  float64 // for Instant
	Wall float64 // for WallClock, in the zone it was made with
}

// ParseMoment reads a time; without an offset it is one of the zone, where a
// time that the clock skips counts as one after the gap.
func ParseMoment(s string, zone *time.Location) (Moment, bool) {
	v, utc, ok := ParseTime(s)
	if !ok {
		return Moment{}, false
	}
	if utc {
		return MomentAt(v, zone), true
	}
	w := time.UnixMicro(int64(v)).UTC()
	t := time.Date(w.Year(), w.Month(), w.Day(), w.Hour(), w.Minute(), w.Second(), w.Nanosecond(), zone)
	return Moment{UTC: float64(t.UnixMicro()), Wall: v}, true
}

// MomentAt returns the moment of an Instant.
func MomentAt(utc float64, zone *time.Location) Moment {
	t := time.UnixMicro(int64(utc)).In(zone)
	_, offset := t.Zone()
	return Moment{UTC: utc, Wall: utc + float64(offset)*1e6}
}

// Compare places a time of a text before (-1), at (0) or after (1) the moment,
// by the offset it carries or by the zone's clock; ok is false for other text.
func (m Moment) Compare(s string) (sign int, ok bool) {
	v, utc, ok := ParseTime(s)
	at := m.Wall
	if utc {
		at = m.UTC
	}
	switch {
	case v < at:
		sign = -1
	case v > at:
		sign = 1
	}
	return sign, ok
}
