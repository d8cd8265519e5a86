package arrowfile

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"time"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/ipc"

	"drumlin/io/events"
)

const (
	magic     = "ARROW1"
	batchRows = 8192
)

// File is an IPC file or stream whose schema has been read. It implements
// events.Source, holds no open handle, and is safe for concurrent use.
type File struct {
	path   string
	format string
	size   int64
	mod    time.Time
	opt    Options
	fields []events.Field
	leaves []leaf
}

// leaf is the way from the record's columns down to a column of values.
type leaf struct {
	path []int
	typ  arrow.DataType
}

var _ events.Source = (*File)(nil)

// Open reads the schema. Errors are *events.Fault: ErrMissing when the file is
// not there, ErrMalformed when it is no whole IPC file or stream,
// ErrUnsupported when it is no regular file or beyond a limit of opt.
func Open(path string, opt Options) (*File, error) {
	st, err := os.Stat(path)
	if err != nil {
		return nil, missing(path, err)
	}
	if !st.Mode().IsRegular() {
		return nil, &events.Fault{Kind: events.ErrUnsupported, File: path, What: "not a regular file", Remedy: "name a file"}
	}
	f := &File{path: path, size: st.Size(), mod: st.ModTime(), opt: opt.filled()}
	h, err := os.Open(path)
	if err != nil {
		return nil, missing(path, err)
	}
	defer h.Close()
	err = f.guard(func() error {
		r, _, err := f.stream(h)
		if err != nil {
			return err
		}
		defer r.Release()
		f.walk(r.Schema().Fields(), "", nil, 16)
		return nil
	})
	if err != nil {
		return nil, err
	}
	return f, nil
}

func missing(path string, err error) error {
	what := "cannot be opened"
	if errors.Is(err, fs.ErrNotExist) {
		what, err = "no such file", nil
	}
	return &events.Fault{Kind: events.ErrMissing, File: path, What: what, Remedy: "check the path", Cause: err}
}

// guard turns the errors and panics of decoding into faults.
func (f *File) guard(fn func() error) (err error) {
	defer func() {
		if r := recover(); r != nil {
			e, ok := r.(error)
			if !ok {
				e = fmt.Errorf("%v", r)
			}
			err = f.fault(e)
		}
	}()
	return f.fault(fn())
}

func (f *File) fault(err error) error {
	var known *events.Fault
	switch {
	case err == nil, errors.As(err, &known), errors.Is(err, context.Canceled), errors.Is(err, context.DeadlineExceeded):
		return err
	case errors.Is(err, errLimit):
		return &events.Fault{Kind: events.ErrUnsupported, File: f.path, What: "too large for this reader", Remedy: "write it with smaller record batches", Cause: err}
	}
	return &events.Fault{Kind: events.ErrMalformed, File: f.path, What: "the Arrow content cannot be read", Remedy: "write the file again", Cause: err}
}

// stream opens the messages of an open file.
func (f *File) stream(h *os.File) (*ipc.Reader, *capped, error) {
	from, to := int64(0), f.size
	f.format = events.FormatArrowStream
	head := make([]byte, 8)
	if n, _ := h.ReadAt(head, 0); n == 8 && string(head[:6]) == magic {
		f.format = events.FormatArrowFile
		tail := make([]byte, 10)
		if f.size < 18 {
			return nil, nil, errors.New("the file is too short")
		}
		if _, err := h.ReadAt(tail, f.size-10); err != nil {
			return nil, nil, err
		}
		if string(tail[4:]) != magic {
			return nil, nil, errors.New("the file does not end as it should; it was cut off or is still being written")
		}
		footer := int64(tail[0]) | int64(tail[1])<<8 | int64(tail[2])<<16 | int64(tail[3])<<24
		from, to = 8, f.size-10-footer
		if to < from {
			return nil, nil, fmt.Errorf("a footer of %d bytes in a file of %d", footer, f.size)
		}
	}
	alloc := &capped{room: f.opt.MaxUnpackedBytes}
	alloc.reset()
	m := &messages{r: bufio.NewReaderSize(io.NewSectionReader(h, from, to-from), 1<<16), left: to - from, opt: f.opt, alloc: alloc}
	r, err := ipc.NewReaderFromMessageReader(m, ipc.WithAllocator(alloc))
	if err != nil {
		return nil, nil, err
	}
	return r, alloc, nil
}

// walk lists the leaves of the fields.
func (f *File) walk(fields []arrow.Field, prefix string, path []int, depth int) {
	for i, c := range fields {
		name := prefix + c.Name
		at := append(append([]int(nil), path...), i)
		if st, ok := c.Type.(*arrow.StructType); ok && depth > 0 {
			f.walk(st.Fields(), name+".", at, depth-1)
			continue
		}
		f.fields = append(f.fields, events.Field{Name: name, Type: c.Type.String(), Numeric: numeric(c.Type)})
		f.leaves = append(f.leaves, leaf{at, c.Type})
	}
}

// Info describes the file; the number of rows is not known before reading.
func (f *File) Info() events.Info {
	return events.Info{Name: f.path, Format: f.format, Bytes: f.size, Rows: -1}
}

// Fields lists the leaves in file order.
func (f *File) Fields() []events.Field { return append([]events.Field(nil), f.fields...) }

// Bounds is never known: the format holds no statistics.
func (f *File) Bounds(string) (lo, hi float64, ok bool) { return 0, 0, false }

// Parts returns 1.
func (f *File) Parts() int { return 1 }

// PartRows returns -1: the rows are not known before reading.
func (f *File) PartRows(int) int64 { return -1 }

// Close does nothing: no handle is held between calls.
func (f *File) Close() error { return nil }

// Read yields the named columns of the only part, 0, in row order. It opens
// the file anew. The context is looked at before every batch and its error is
// returned unwrapped. Other errors are *events.Fault: ErrSetting for a column
// that is not there or there twice, ErrUnsupported for one that holds no
// numbers or a message above a limit, ErrMalformed for broken bytes.
func (f *File) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	if part != 0 {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: fmt.Sprintf("no part %d in an Arrow input", part)}
	}
	if len(columns) == 0 {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: "no columns are asked for"}
	}
	at := make([]int, len(columns))
	for k, name := range columns {
		if err := events.CheckNumeric(name, f.fields); err != nil {
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
	h, err := os.Open(f.path)
	if err != nil {
		return missing(f.path, err)
	}
	defer h.Close()
	if st, err := h.Stat(); err != nil || st.Size() != f.size || !st.ModTime().Equal(f.mod) {
		return &events.Fault{Kind: events.ErrMalformed, File: f.path, What: "the file changed while it was in use", Remedy: "run again when it is complete", Cause: err}
	}
	var r *ipc.Reader
	copyOf := *f // stream notes the format again
	if err := f.guard(func() (err error) { r, _, err = copyOf.stream(h); return err }); err != nil {
		return err
	}
	defer r.Release()
	batch, views := make([][]float64, len(columns)), make([][]float64, len(columns))
	for k := range batch {
		batch[k] = make([]float64, batchRows)
	}
	for {
		if err := ctx.Err(); err != nil {
			return err
		}
		var rec arrow.Record
		err := f.guard(func() (err error) {
			rec, err = r.Read()
			if errors.Is(err, io.EOF) {
				rec, err = nil, nil
			}
			return err
		})
		if err != nil {
			return err
		}
		if rec == nil {
			return nil
		}
		rows := rec.NumRows()
		if rows < 0 || rows > math.MaxInt32 {
			return f.fault(fmt.Errorf("a record batch of %d rows", rows))
		}
		for done := 0; done < int(rows); done += batchRows {
			if err := ctx.Err(); err != nil {
				return err
			}
			n := min(batchRows, int(rows)-done)
			for k, i := range at {
				views[k] = batch[k][:n]
				if err := f.guard(func() error { return f.leaves[i].values(views[k], rec, done) }); err != nil {
					return err
				}
			}
			if err := yield(events.Batch{Columns: views}); err != nil {
				return err
			}
		}
	}
}
