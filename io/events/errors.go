package events

import (
	"errors"
	"strings"
)

// Kinds of fault in an input, to be told apart with errors.Is.
var (
	// ErrMissing: the input is not there or cannot be opened.
	ErrMissing = errors.New("input missing")
	// ErrMalformed: the bytes break the format's own rules.
	ErrMalformed = errors.New("input malformed")
	// ErrUnsupported: legal, but not something this program reads.
	ErrUnsupported = errors.New("input not supported")
	// ErrSetting: the request does not fit the input (no such column, ...).
	ErrSetting = errors.New("bad setting")
)

// Fault is an error about an input: what, where, and what to do.
type Fault struct {
	Kind   error  // one of the sentinels above
	File   string // path as given
	Where  string // "row group 3, column lat", "line 17", "" for the whole file
	What   string // lower case, one line
	Remedy string // what the user can do, "" if nothing
	Cause  error  // underlying error, may be nil
}

// Error prints one line: file, place, what is wrong, what to do.
func (f *Fault) Error() string {
	var b strings.Builder
	for _, s := range []string{f.File, f.Where} {
		if s != "" {
			b.WriteString(s + ": ")
		}
	}
	b.WriteString(f.What)
	if f.Cause != nil {
		b.WriteString(": " + oneLine(f.Cause.Error()))
	}
	if f.Remedy != "" {
		b.WriteString("; " + f.Remedy)
	}
	return b.String()
}

// Unwrap gives errors.Is both the kind and the cause.
func (f *Fault) Unwrap() []error {
	if f.Cause == nil {
		return []error{f.Kind}
	}
	return []error{f.Kind, f.Cause}
}

func oneLine(s string) string {
	s = strings.Join(strings.Fields(s), " ")
	if len(s) > 200 {
		s = s[:200] + "..."
	}
	return s
}
