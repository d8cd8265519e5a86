package parquetfile

import (
	"context"
	"errors"
	"fmt"
	"os"
	"sync"

	"github.com/apache/arrow/go/v17/parquet"

	"drumlin/io/events"
)

// workspace is the memory of one Read; it is used again by later ones.
type workspace struct {
	cols   []*column
	batch  [][]float64
	views  [][]float64
	unpack unpacker
}

var workspaces = sync.Pool{New: func() any { return new(workspace) }}

func (w *workspace) prepare(cols, rows int) {
	for len(w.cols) < cols {
		w.cols = append(w.cols, new(column))
	}
	for len(w.batch) < cols {
		w.batch = append(w.batch, nil)
	}
	for i := range cols {
		w.batch[i] = scratch(w.batch[i], rows)
	}
	w.views = scratch(w.views, cols)
}

func (w *workspace) release() {
	for _, c := range w.cols {
		c.pages.release()
		c.leaf, c.vals.leaf, c.vals.src, c.vals.strs.src, c.vals.code = nil, nil, nil, nil, nil
		c.levels.b, c.vals.runs.b, c.vals.del = nil, nil, delta{}
		if cap(c.vals.dict) > keepBytes/8 {
			c.vals.dict = nil
		}
	}
	workspaces.Put(w)
}

// Read yields the named columns of one row group in row order. It opens the
// file anew, so that parts can be read at the same time. The context is looked
// at before every batch and its error is returned unwrapped. Other errors are
// *events.Fault: ErrSetting for a column that is not there or there twice,
// ErrUnsupported for one that is not read or whose bytes are encrypted,
// packed in a codec that is not read, or above a limit, ErrMalformed for broken
// bytes and for a count of rows other than the row group states.
func (f *File) Read(ctx context.Context, part int, columns []string, yield func(events.Batch) error) error {
	return f.ReadCoded(ctx, part, columns, nil, yield)
}

// ReadCoded is Read with coders for columns of byte strings: codes[k], where
// not nil, makes the numbers of column k, which may then be binary. A text
// column without one comes with the words of its numbers.
func (f *File) ReadCoded(ctx context.Context, part int, columns []string, codes []Coder, yield func(events.Batch) error) error {
	if part < 0 || part >= f.Parts() {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: fmt.Sprintf("no row group %d among %d", part, f.Parts())}
	}
	if len(columns) == 0 {
		return &events.Fault{Kind: events.ErrSetting, File: f.path, What: "no columns are asked for"}
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	at := make([]int, len(columns))
	fields := f.Fields()
	for k, name := range columns {
		check := events.CheckReadable(name, fields)
		if k < len(codes) && codes[k] != nil {
			_, check = events.FindField(name, fields)
		}
		if check != nil {
			return f.fault("", check)
		}
		for i := range f.leaves {
			if f.leaves[i].name == name {
				at[k] = i
			}
		}
	}
	rows := f.meta.RowGroups[part].NumRows
	if rows == 0 {
		return nil
	}
	h, err := f.reopen()
	if err != nil {
		return err
	}
	defer h.Close()

	w := workspaces.Get().(*workspace)
	defer w.release()
	size := int(min(int64(f.opt.BatchRows), rows))
	w.prepare(len(columns), size)
	codes, listed := f.coders(at, codes)
	where := make([]string, len(columns))
	for k, i := range at {
		where[k] = fmt.Sprintf("row group %d, column %s", part, columns[k])
		err := f.guard(where[k], func() error { return f.openChunk(w.cols[k], h, part, i, codes[k], &w.unpack) })
		if err != nil {
			return err
		}
	}
	for done := int64(0); done < rows; {
		if err := ctx.Err(); err != nil {
			return err
		}
		n := int(min(int64(size), rows-done))
		for k := range columns {
			dst := w.batch[k][:n]
			if codes[k] != nil {
				codes[k].Next()
			}
			if err := f.guard(where[k], func() error { return w.cols[k].read(dst) }); err != nil {
				return err
			}
			w.views[k] = dst
		}
		done += int64(n)
		if done == rows {
			for k := range columns {
				if err := f.guard(where[k], w.cols[k].finish); err != nil {
					return err
				}
			}
		}
		b := events.Batch{Columns: w.views}
		if listed {
			b.Words = make([][]string, len(columns))
			for k := range columns {
				if own, ok := codes[k].(*events.Words); ok {
					b.Words[k] = own.List()
				}
			}
		}
		if err := yield(b); err != nil {
			return err
		}
	}
	return nil
}

// coders completes the coders: one of words for each text column without one.
func (f *File) coders(at []int, given []Coder) (codes []Coder, listed bool) {
	codes = make([]Coder, len(at))
	copy(codes, given)
	for k, i := range at {
		if f.leaves[i].kind == kindCode && codes[k] == nil {
			codes[k], listed = new(events.Words), true
		} else if f.leaves[i].kind != kindCode {
			codes[k] = nil
		}
	}
	return codes, listed
}

// reopen opens the file and makes sure that it is still the one described.
func (f *File) reopen() (*os.File, error) {
	h, err := os.Open(f.path)
	if err != nil {
		return nil, missing(f.path, err)
	}
	st, err := h.Stat()
	if err != nil || st.Size() != f.size || !st.ModTime().Equal(f.mod) {
		h.Close()
		return nil, &events.Fault{Kind: events.ErrMalformed, File: f.path, What: "the file changed while it was in use",
			Remedy: "run again when it is complete", Cause: err}
	}
	return h, nil
}

// openChunk points a column at a chunk after checking its metadata.
func (f *File) openChunk(c *column, h *os.File, part, i int, code Coder, u *unpacker) error {
	rg := f.meta.RowGroups[part]
	l := &f.leaves[i]
	if len(rg.Columns) != len(f.leaves) || rg.Columns[i] == nil {
		return fmt.Errorf("row group has %d columns, the schema %d", len(rg.Columns), len(f.leaves))
	}
	chunk := rg.Columns[i]
	unsupported := func(what, remedy string) error {
		return &events.Fault{Kind: events.ErrUnsupported, What: what, Remedy: remedy}
	}
	if chunk.CryptoMetadata != nil {
		return unsupported("the column is encrypted", "write the file again without encryption")
	}
	if chunk.FilePath != nil && *chunk.FilePath != "" {
		return unsupported("the column lies in another file", "write one whole file")
	}
	m := chunk.MetaData
	if m == nil {
		return errors.New("column without metadata")
	}
	if parquet.Type(m.Type) != l.phys {
		return fmt.Errorf("column is %s in the schema and %s in the row group", l.phys, m.Type)
	}
	if m.NumValues != rg.NumRows {
		return fmt.Errorf("column has %d values, the row group %d rows", m.NumValues, rg.NumRows)
	}
	if name := codecFault(int32(m.Codec)); name != "" {
		return unsupported("compression "+name+" is not read", "write the file again with zstd, snappy, gzip, brotli or LZ4_RAW")
	}
	if m.TotalUncompressedSize > f.opt.MaxChunkBytes {
		return &tooLarge{what: "column chunk", size: m.TotalUncompressedSize, limit: f.opt.MaxChunkBytes}
	}
	start := m.DataPageOffset
	if d := m.DictionaryPageOffset; d != nil && *d > 0 && *d < start {
		start = *d
	}
	if start < 4 || m.TotalCompressedSize < 0 || start > f.end || m.TotalCompressedSize > f.end-start {
		return fmt.Errorf("column chunk at byte %d of %d bytes lies outside the data", start, m.TotalCompressedSize)
	}
	end := start + m.TotalCompressedSize
	c.padded = f.old
	if f.old { // such files leave the dictionary's header out of the length
		end = min(end+100, f.end)
	}
	c.leaf, c.rows, c.left, c.hasDict = l, rg.NumRows, 0, false
	c.vals.leaf, c.vals.dict = l, c.vals.dict[:0]
	c.vals.code = code
	c.pages.reset(h, start, end, int32(m.Codec), f.opt.MaxPageBytes, u)
	return nil
}
