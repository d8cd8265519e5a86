package events

import "context"

// Source is one input of events, opened and its schema known. A Source is safe
// for concurrent Read calls on different parts.
type Source interface {
	// Info says what the input is, for the record and for messages.
	Info() Info
	// Fields lists the columns in file order.
	Fields() []Field
	// Bounds returns the least and greatest value of a column as the file's own
	// statistics state them, and false where any part lacks usable statistics.
	Bounds(column string) (lo, hi float64, ok bool)
	// Parts returns how many pieces can be read independently (row groups; 1 for CSV).
	Parts() int
	// PartRows returns the rows of a part, or -1 where the format does not say.
	PartRows(part int) int64
	// Read yields the named columns of one part in row order, batch by batch.
	// It returns an error when fewer or more rows come out than the file
	// promised; a panic below becomes an error. An error from yield stops the
	// read and is returned unwrapped.
	Read(ctx context.Context, part int, columns []string, yield func(Batch) error) error
	Close() error
}

// Info describes an input.
type Info struct {
	Name   string // path as given
	Format string // "parquet", "csv"
	Bytes  int64  // size on disk, -1 for a stream
	Rows   int64  // rows stated by the file, -1 where it does not say
	CRS    string // coordinate reference the file itself states, "" if none
}

// Field is one column.
type Field struct {
	Name    string
	Type    string // as the format calls it, for messages: "DOUBLE", "text"
	Numeric bool   // can be read as float64
}

// Batch holds equally long columns, in the order they were asked for. The
// memory belongs to the reader and is used again after yield returns; the
// receiver may overwrite the values. A null is the NaN Null, so that it can be
// told from a NaN in the data.
type Batch struct {
	Columns [][]float64
}

// Len returns the number of rows.
func (b Batch) Len() int {
	if len(b.Columns) == 0 {
		return 0
	}
	return len(b.Columns[0])
}
