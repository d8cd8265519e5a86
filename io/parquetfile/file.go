package parquetfile

import (
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"time"

	"github.com/apache/arrow/go/v17/parquet/metadata"

	"drumlin/io/events"
)

// File is a Parquet file whose footer has been read. It implements
// events.Source, holds no open handle, and is safe for concurrent use.
type File struct {
	path   string
	opt    Options
	size   int64
	mod    time.Time
	end    int64 // file offset of the footer
	rows   int64 // of all row groups
	meta   *metadata.FileMetaData
	leaves []leaf
	old    bool // written by a version that understates chunk lengths
	crs    string
	geoms  []Geometry
}

var _ events.Source = (*File)(nil)

// Open reads the footer of the file. Errors are *events.Fault: ErrMissing when
// the file is not there, ErrMalformed when its bytes break the format,
// ErrUnsupported when it is encrypted, above a limit, or no regular file.
func Open(path string, opt Options) (*File, error) {
	st, err := os.Stat(path)
	if err != nil {
		return nil, missing(path, err)
	}
	if !st.Mode().IsRegular() {
		return nil, &events.Fault{Kind: events.ErrUnsupported, File: path, What: "not a regular file", Remedy: "name a file"}
	}
	h, err := os.Open(path)
	if err != nil {
		return nil, missing(path, err)
	}
	defer h.Close()
	f := &File{path: path, opt: opt.filled(), size: st.Size(), mod: st.ModTime()}
	foot, fault := readFooter(h, f.size, f.opt)
	if fault != nil {
		fault.File = path
		return nil, fault
	}
	if err := f.guard("footer", func() error { return f.describe(foot) }); err != nil {
		return nil, err
	}
	return f, nil
}

func missing(path string, err error) error {
	what := "cannot be opened"
	if errors.Is(err, fs.ErrNotExist) {
		what = "no such file"
		err = nil
	}
	return &events.Fault{Kind: events.ErrMissing, File: path, What: what, Remedy: "check the path", Cause: err}
}

// describe hands the walked footer to the library and keeps what is needed.
func (f *File) describe(foot *footer) error {
	meta, err := metadata.NewFileMetaData(foot.raw, nil)
	if err != nil {
		return err
	}
	f.meta, f.end = meta, foot.end
	f.old = meta.WriterVersion().LessThan(metadata.Parquet816FixedVersion)
	for i := range meta.Schema.NumColumns() {
		f.leaves = append(f.leaves, newLeaf(meta.Schema.Column(i), foot.dropped[i]))
	}
	var rows int64
	for i, rg := range meta.RowGroups {
		if rg.NumRows < 0 || rows > math.MaxInt64-rg.NumRows {
			return fmt.Errorf("row group %d states %d rows", i, rg.NumRows)
		}
		rows += rg.NumRows
	}
	if rows != meta.NumRows && meta.NumRows != 0 { // some writers leave it out
		return fmt.Errorf("the file states %d rows, its row groups %d", meta.NumRows, rows)
	}
	f.rows = rows
	f.describeGeometry()
	return nil
}

// guard runs fn; a panic or a plain error becomes a fault of this file.
func (f *File) guard(where string, fn func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			cause, ok := r.(error)
			if !ok {
				cause = fmt.Errorf("%v", r)
			}
			err = f.fault(where, cause)
		}
	}()
	if err := fn(); err != nil {
		return f.fault(where, err)
	}
	return nil
}

// fault wraps a cause that has no kind yet.
func (f *File) fault(where string, cause error) error {
	var own *events.Fault
	if errors.As(cause, &own) {
		own.File, own.Where = f.path, where
		return own
	}
	var large *tooLarge
	if errors.As(cause, &large) {
		return &events.Fault{Kind: events.ErrUnsupported, File: f.path, Where: where, What: "too large to read safely",
			Remedy: "write the file again with smaller pages and row groups", Cause: cause}
	}
	return &events.Fault{Kind: events.ErrMalformed, File: f.path, Where: where, What: "file is broken",
		Remedy: "write the file again or leave it out", Cause: cause}
}

// Info describes the file.
func (f *File) Info() events.Info {
	return events.Info{Name: f.path, Format: events.FormatParquet, Bytes: f.size, Rows: f.rows, CRS: f.crs, Geometries: f.geometries()}
}

// Fields lists the leaf columns in file order, by dotted path.
func (f *File) Fields() []events.Field {
	out := make([]events.Field, len(f.leaves))
	for i, l := range f.leaves {
		out[i] = events.Field{Name: l.name, Type: l.typ, Numeric: l.numeric(), Class: l.class}
	}
	return out
}

// Parts returns the number of row groups.
func (f *File) Parts() int { return len(f.meta.RowGroups) }

// PartRows returns the rows of a row group, -1 for one that does not exist.
func (f *File) PartRows(part int) int64 {
	if part < 0 || part >= f.Parts() {
		return -1
	}
	return f.meta.RowGroups[part].NumRows
}

// Close does nothing: no handle is held between calls.
func (f *File) Close() error { return nil }
