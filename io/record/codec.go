package record

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strings"
)

// ErrMalformed: a run.json that is not one, or not of this version.
var ErrMalformed = errors.New("record malformed")

// maxBytes bounds what Read takes in.
const maxBytes = 64 << 20

// Write validates r and writes it as indented JSON that ends in a newline.
// Nil slices that are not optional become empty lists. r itself is unchanged.
func Write(w io.Writer, r *Record) error {
	c := *r
	c.Kind, c.Version = Kind, Version
	c.Times.Started, c.Times.Finished = c.Times.Started.UTC(), c.Times.Finished.UTC()
	fill(&c.Rows.SetAside)
	fill(&c.Regions.Contents)
	fill(&c.Guard.RegionsWithheld)
	fill(&c.Files)
	fill(&c.Inputs)
	if err := c.Validate(); err != nil {
		return err
	}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", "  ")
	if err := enc.Encode(&c); err != nil {
		return fmt.Errorf("record: encode: %w", err)
	}
	_, err := w.Write(b.Bytes())
	return err
}

func fill[T any](s *[]T) {
	if *s == nil {
		*s = []T{}
	}
}

// Read reads a run.json strictly: an unknown member, another version, anything
// after the object, or a fault Validate finds is an error (ErrMalformed).
func Read(r io.Reader) (*Record, error) {
	data, err := readAll(r)
	if err != nil {
		return nil, err
	}
	k, err := sniff(data)
	if err != nil {
		return nil, err
	}
	if k.Version != Version {
		return nil, fmt.Errorf("record: run.json has record_version %d and this program reads %d; use the program that wrote it: %w", k.Version, Version, ErrMalformed)
	}
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	var rec Record
	if err := dec.Decode(&rec); err != nil {
		return nil, fmt.Errorf("record: run.json near byte %d: %w: %w", dec.InputOffset(), err, ErrMalformed)
	}
	if rest := bytes.TrimSpace(data[dec.InputOffset():]); len(rest) > 0 {
		return nil, fmt.Errorf("record: run.json has %d bytes after its object: %w", len(rest), ErrMalformed)
	}
	if err := rec.Validate(); err != nil {
		return nil, fmt.Errorf("%s: %w", strings.ReplaceAll(err.Error(), "\n", "; "), ErrMalformed)
	}
	return &rec, nil
}

// Outline is what a run.json of any version says about its bundle.
type Outline struct {
	Version int
	Files   []string // names of the files listed, slash-separated
}

// Sniff reads just enough to tell whether r is a run.json of this program,
// whatever its version, and which files it lists. Anything else is ErrMalformed.
func Sniff(r io.Reader) (Outline, error) {
	data, err := readAll(r)
	if err != nil {
		return Outline{}, err
	}
	return sniff(data)
}

func sniff(data []byte) (Outline, error) {
	var k struct {
		Kind    string `json:"record"`
		Version int    `json:"record_version"`
		Files   []File `json:"files"`
		Times   struct {
			Files []File `json:"files"`
		} `json:"times"`
	}
	if err := json.Unmarshal(data, &k); err != nil {
		return Outline{}, fmt.Errorf("record: run.json: %w: %w", err, ErrMalformed)
	}
	if k.Kind != Kind || k.Version < 1 {
		return Outline{}, fmt.Errorf("record: run.json is not a record of this program: %w", ErrMalformed)
	}
	o := Outline{Version: k.Version}
	for _, f := range append(k.Files, k.Times.Files...) {
		o.Files = append(o.Files, f.Name)
	}
	return o, nil
}

func readAll(r io.Reader) ([]byte, error) {
	data, err := io.ReadAll(io.LimitReader(r, maxBytes+1))
	if err != nil {
		return nil, fmt.Errorf("record: read: %w", err)
	}
	if len(data) > maxBytes {
		return nil, fmt.Errorf("record: run.json is larger than %d MiB: %w", maxBytes>>20, ErrMalformed)
	}
	return data, nil
}
