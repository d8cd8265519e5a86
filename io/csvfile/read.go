package csvfile

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"

	"drumlin/io/events"
)

// Read yields the named columns of the only part, 0, in row order. It opens
// the file anew. The context is looked at before every batch and its error is
// returned unwrapped. Other errors are *events.Fault: ErrSetting for a column
// that is not there or there twice, ErrMalformed with the line for a row with another number of cells than the
// header, a quote out of place, or a row that is too long.
func (f *File) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	if part != 0 {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: fmt.Sprintf("no part %d in a text file", part)}
	}
	if len(columns) == 0 {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: "no columns are asked for"}
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	at := make([]int, len(columns))
	for k, name := range columns {
		if err := events.CheckReadable(name, f.fields); err != nil {
			var fault *events.Fault
			if errors.As(err, &fault) {
				fault.File = f.path
			}
			return err
		}
		for i := range f.fields {
			if f.fields[i].Name == name {
				at[k] = i
			}
		}
	}
	h, err := f.open()
	if err != nil {
		return err
	}
	defer h.Close()
	r, bound, err := f.reader(h)
	if err != nil {
		return err
	}
	r.FieldsPerRecord = len(f.fields)
	if _, err := r.Read(); err != nil {
		return f.rowFault(err)
	}
	bound.step(r)
	batch := make([][]float64, len(columns))
	for k := range batch {
		batch[k] = make([]float64, batchRows)
	}
	texts := make([]*events.Words, len(columns))
	listed := false
	for k, i := range at {
		if f.fields[i].Class == events.Text {
			texts[k], listed = new(events.Words), true
		}
	}
	views := make([][]float64, len(columns))
	emit := func(n int) error {
		b := events.Batch{Columns: views}
		for k := range views {
			views[k] = batch[k][:n]
		}
		if listed {
			b.Words = make([][]string, len(columns))
			for k, w := range texts {
				if w != nil {
					b.Words[k] = w.List()
				}
			}
		}
		if err := yield(b); err != nil {
			return err
		}
		for _, w := range texts {
			if w != nil {
				w.Next()
			}
		}
		return nil
	}
	n := 0
	for {
		rec, err := r.Read()
		if err == io.EOF {
			break
		}
		if err != nil {
			return f.rowFault(err)
		}
		bound.step(r)
		for k, i := range at {
			if texts[k] != nil {
				batch[k][n] = code(texts[k], rec[i])
			} else {
				batch[k][n] = number(rec[i])
			}
		}
		if n++; n == batchRows {
			if err := emit(n); err != nil {
				return err
			}
			n = 0
			if err := ctx.Err(); err != nil {
				return err
			}
		}
	}
	if n > 0 {
		return emit(n)
	}
	return nil
}

// number reads a cell: events.Null, events.NotAValue or the number. Hexadecimal
// and underscores are no numbers here; NaN and infinities are.
func number(cell string) float64 {
	s := cell
	if s == "" {
		return events.Null
	}
	if c := s[len(s)-1]; s[0] <= ' ' || s[0] >= 0x80 || c <= ' ' || c >= 0x80 {
		if s = strings.TrimSpace(s); s == "" {
			return events.Null
		}
	}
	if c := s[0]; c|0x20 == 'n' && (strings.EqualFold(s, "na") || strings.EqualFold(s, "null")) {
		return events.Null
	}
	if len(s) > 64 || strings.IndexByte(s, 'x') >= 0 || strings.IndexByte(s, 'X') >= 0 || strings.IndexByte(s, '_') >= 0 {
		return events.NotAValue
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil && !isRange(err) {
		return events.NotAValue
	}
	return v
}

// isRange accepts numbers too large to hold: they come out infinite and are
// counted so.
func isRange(err error) bool {
	return errors.Is(err, strconv.ErrRange)
}
