package csvfile

import (
	"bufio"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"

	"drumlin/io/events"
)

// Writer writes columns of numbers as comma-separated text, a header line
// first: every number in the fewest digits that give the same float64 back, a
// null as an empty cell, NaN and infinities as strconv writes them. The same
// calls give the same bytes. It is not safe for sharing.
type Writer struct {
	w    *bufio.Writer
	cols int
	line []byte
}

// NewWriter writes the header.
func NewWriter(w io.Writer, names []string) (*Writer, error) {
	if len(names) == 0 {
		return nil, errors.New("csv: no columns to write")
	}
	out := &Writer{w: bufio.NewWriterSize(w, 1<<16), cols: len(names)}
	head := csv.NewWriter(out.w)
	if err := head.Write(names); err != nil {
		return nil, err
	}
	head.Flush()
	return out, head.Error()
}

// WriteBatch writes rows: equally long columns in the order of NewWriter.
func (w *Writer) WriteBatch(columns [][]float64) error {
	if len(columns) != w.cols {
		return fmt.Errorf("csv: %d columns where %d were announced", len(columns), w.cols)
	}
	for i, c := range columns {
		if len(c) != len(columns[0]) {
			return fmt.Errorf("csv: column %d has %d values, column 1 has %d", i+1, len(c), len(columns[0]))
		}
	}
	for i := range columns[0] {
		w.line = w.line[:0]
		for k, c := range columns {
			if k > 0 {
				w.line = append(w.line, ',')
			}
			if v := c[i]; !events.IsNull(v) {
				if v == 0 || math.Abs(v) >= 1e-5 && math.Abs(v) < 1e15 {
					w.line = strconv.AppendFloat(w.line, v, 'f', -1, 64)
				} else {
					w.line = strconv.AppendFloat(w.line, v, 'g', -1, 64)
				}
			}
		}
		if len(w.line) == 0 { // a lone null: an empty line would be no row
			w.line = append(w.line, `""`...)
		}
		w.line = append(w.line, '\n')
		if _, err := w.w.Write(w.line); err != nil {
			return err
		}
	}
	return nil
}

// Close writes what is left. It does not close the underlying writer.
func (w *Writer) Close() error { return w.w.Flush() }
