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
	// Read yields the named columns of one part in row order, batch by batch:
	// any that Field.Readable says can be read, as Batch describes.
	// It returns an error when fewer or more rows come out than the file
	// promised; a panic below becomes an error. An error from yield stops the
	// read and is returned unwrapped.
	Read(ctx context.Context, part int, columns []string, yield func(Batch) error) error
	Close() error
}

// Info describes an input.
type Info struct {
	Name       string     // path as given
	Format     string     // "parquet", "csv"
	Bytes      int64      // size on disk, -1 for a stream
	Rows       int64      // rows stated by the file, -1 where it does not say
	CRS        string     // coordinate reference the file itself states, "" if none
	Geometries []Geometry // geometry columns the file declares
	Path       string     // file whose bytes are the input's, for its digest; "" when it is Name
}

// DigestPath returns the file whose bytes are the input's.
func (i Info) DigestPath() string {
	if i.Path != "" {
		return i.Path
	}
	return i.Name
}

// Geometry is a geometry column. Its points are read as the two numeric
// columns Name.x and Name.y.
type Geometry struct {
	Name    string
	Type    string // as the format calls it, for messages: "WKB", "point"
	CRS     string // as in Info, "" where the file says that it is unknown
	Primary bool   // the file's main geometry, taken when no columns are named
	Refusal string // why it cannot be read as points, "" if it can
}

// Class says what the float64 values of a column mean.
type Class uint8

const (
	// Plain columns are numbers where Field.Numeric says so, else unreadable.
	Plain Class = iota
	// Text values are places in Batch.Words.
	Text
	// Instant values are microseconds since 1970 in UTC, exact from 1685 to 2255.
	Instant
	// WallClock values are microseconds since 1970 on a clock whose zone the
	// input does not tell; dates are such a clock at midnight.
	WallClock
	// Truth values are 0 and 1.
	Truth
)

// Field is one column.
type Field struct {
	Name    string
	Type    string // as the format calls it, for messages: "DOUBLE", "text"
	Numeric bool   // can be read as a number, such as a coordinate or a weight
	Class   Class  // what the values mean
}

// Readable reports whether Source.Read yields the column.
func (f Field) Readable() bool { return f.Numeric || f.Class != Plain }

// Batch holds equally long columns, in the order they were asked for. The
// memory belongs to the reader and is used again after yield returns; the
// receiver may overwrite the values. A null is the NaN Null, so that it can be
// told from a NaN in the data.
//
// A text column k holds whole numbers i, 0 <= i < len(Words[k]), that stand for
// Words[k][i]; a word may occur under several numbers, and the numbers of one
// batch mean nothing in the next. Words has no entry for other columns and is
// nil where no text was asked for.
type Batch struct {
	Columns [][]float64
	Words   [][]string
}

// Len returns the number of rows.
func (b Batch) Len() int {
	if len(b.Columns) == 0 {
		return 0
	}
	return len(b.Columns[0])
}

// WordsOf returns the words of column k, nil if it is no text.
func (b Batch) WordsOf(k int) []string {
	if k < len(b.Words) {
		return b.Words[k]
	}
	return nil
}

// Stat is what the input itself says of a column in one part, on the scale on
// which Read yields it. NaN in the data may lie outside the range.
type Stat struct {
	Lo, Hi float64  // least and greatest value; of text nothing is meant
	Nulls  int64    // absent values, -1 where it does not say
	Words  []string // every word of a text column, nil where it does not say
}

// Surveyor is a Source that knows something of a part before it is read.
type Surveyor interface {
	// Stat returns what is stated of a column in a part, and false where
	// nothing is or it cannot be trusted.
	Stat(part int, column string) (Stat, bool)
}

// StatOf asks a source that may be a Surveyor.
func StatOf(s Source, part int, column string) (Stat, bool) {
	if v, ok := s.(Surveyor); ok {
		return v.Stat(part, column)
	}
	return Stat{}, false
}
