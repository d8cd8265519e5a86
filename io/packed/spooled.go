package packed

import (
	"context"
	"errors"
	"os"
	"strings"

	"drumlin/io/events"
)

// Spooled is a source whose bytes lie in a temporary file: messages and the
// record speak of the input as it was given, and Close removes the file.
type Spooled struct {
	events.Source
	Name   string // input as given
	Format string // for the record, such as "parquet in gzip"
	Bytes  int64  // size of the input itself, -1 for a stream
	Digest string // file whose bytes are the input's
	Temp   string // file to remove
}

// Info describes the input as it was given.
func (s *Spooled) Info() events.Info {
	i := s.Source.Info()
	i.Name, i.Format, i.Bytes, i.Path = s.Name, s.Format, s.Bytes, s.Digest
	return i
}

// Read reads the temporary file.
func (s *Spooled) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	return Rename(s.Source.Read(ctx, part, columns, yield), s.Temp, s.Name)
}

// Stat asks the source below.
func (s *Spooled) Stat(part int, column string) (events.Stat, bool) {
	return events.StatOf(s.Source, part, column)
}

// Close closes the source and removes the temporary file.
func (s *Spooled) Close() error {
	return errors.Join(s.Source.Close(), os.Remove(s.Temp))
}

// Rename puts the name of an input in place of the temporary file's in a fault.
func Rename(err error, temp, name string) error {
	var f *events.Fault
	if temp == "" || !errors.As(err, &f) || !strings.Contains(f.File, temp) {
		return err
	}
	c := *f
	c.File = strings.ReplaceAll(f.File, temp, name)
	return &c
}
