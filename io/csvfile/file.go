package csvfile

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strings"
	"time"
	"unicode/utf8"

	"drumlin/io/events"
)

const (
	maxRowBytes = 1 << 20 // longest row, quoted line breaks included
	sampleRows  = 1000    // leading rows that tell the types
	batchRows   = 8192
)

// File is a text file whose header and leading rows have been read. It
// implements events.Source, holds no open handle, and is safe for concurrent
// use.
type File struct {
	path   string
	format string
	unpack Unpack // nil for plain text
	size   int64
	mod    time.Time
	delim  rune
	skip   int64 // bytes of a byte-order mark
	fields []events.Field
}

var _ events.Source = (*File)(nil)

// Unpack returns the text in a packed stream. It need not close the stream.
type Unpack func(io.Reader) (io.ReadCloser, error)

// Open reads the header and the leading rows. Errors are *events.Fault:
// ErrMissing when the file is not there, ErrMalformed when it is empty, has no
// header, or one of the leading rows is broken (with its line), ErrUnsupported
// when it is no regular file or its text is UTF-16.
func Open(path string) (*File, error) { return OpenPacked(path, nil, events.FormatCSV) }

// OpenPacked is Open for a file whose text is packed, by gzip for example: it
// is unpacked anew for every pass, so that no copy of it is kept. format is
// what Info says.
func OpenPacked(path string, unpack Unpack, format string) (*File, error) {
	st, err := os.Stat(path)
	if err != nil {
		return nil, missing(path, err)
	}
	if !st.Mode().IsRegular() {
		return nil, &events.Fault{Kind: events.ErrUnsupported, File: path, What: "not a regular file", Remedy: "name a file"}
	}
	f := &File{path: path, format: format, unpack: unpack, size: st.Size(), mod: st.ModTime()}
	for _, step := range []func(io.Reader) error{f.readHeader, f.inferTypes} {
		h, err := f.open()
		if err != nil {
			return nil, err
		}
		err = step(h)
		h.Close()
		if err != nil {
			return nil, err
		}
	}
	return f, nil
}

// text is an open stream of text.
type text struct {
	io.Reader
	file   *os.File
	packed io.Closer // nil for plain text
}

func (t *text) Close() {
	if t.packed != nil {
		_ = t.packed.Close() // read-only
	}
	_ = t.file.Close()
}

// open opens the file and makes sure that it is still the one described.
func (f *File) open() (*text, error) {
	h, err := os.Open(f.path)
	if err != nil {
		return nil, missing(f.path, err)
	}
	if st, err := h.Stat(); err != nil || st.Size() != f.size || !st.ModTime().Equal(f.mod) {
		h.Close()
		return nil, f.malformed(0, "the file changed while it was in use", "run again when it is complete")
	}
	t := &text{file: h, Reader: io.NewSectionReader(h, 0, f.size)}
	if f.unpack != nil {
		r, err := f.unpack(t.Reader)
		if err != nil {
			h.Close()
			return nil, f.broken(err)
		}
		t.Reader, t.packed = r, r
	}
	return t, nil
}

// broken is the fault of a stream that cannot be read on.
func (f *File) broken(err error) error {
	if f.unpack == nil {
		return &events.Fault{Kind: events.ErrMissing, File: f.path, What: "cannot be read", Cause: err}
	}
	return &events.Fault{Kind: events.ErrMalformed, File: f.path, What: "cannot be unpacked", Remedy: "write the file again or leave it out", Cause: err}
}

func missing(path string, err error) error {
	what := "cannot be opened"
	if errors.Is(err, fs.ErrNotExist) {
		what, err = "no such file", nil
	}
	return &events.Fault{Kind: events.ErrMissing, File: path, What: what, Remedy: "check the path", Cause: err}
}

func (f *File) malformed(line int, what, remedy string) error {
	where := ""
	if line > 0 {
		where = fmt.Sprintf("line %d", line)
	}
	return &events.Fault{Kind: events.ErrMalformed, File: f.path, Where: where, What: what, Remedy: remedy}
}

// readHeader looks at the first line: byte-order mark, delimiter, names.
func (f *File) readHeader(h io.Reader) error {
	head := make([]byte, 64<<10)
	n, err := io.ReadFull(h, head)
	if err != nil && !errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF) {
		return f.broken(err)
	}
	whole := err != nil
	head = head[:n]
	if bytes.HasPrefix(head, []byte("\xff\xfe")) || bytes.HasPrefix(head, []byte("\xfe\xff")) {
		return &events.Fault{Kind: events.ErrUnsupported, File: f.path, What: "the text is UTF-16", Remedy: "save it as UTF-8"}
	}
	if bytes.HasPrefix(head, []byte("\xef\xbb\xbf")) {
		f.skip = 3
		head = head[3:]
	}
	if len(bytes.TrimSpace(head)) == 0 {
		return f.malformed(0, "the file is empty", "a line of column names and rows are needed")
	}
	if bytes.IndexByte(head, 0) >= 0 {
		return f.malformed(0, "the file is not text", "name a Parquet or CSV file")
	}
	f.delim = delimiter(head)
	if !whole { // a header may be longer; its reader stops at the longest row
		h = io.MultiReader(bytes.NewReader(head), h)
	} else {
		h = bytes.NewReader(head)
	}
	names, err := f.csv(&bounded{r: h, stop: maxRowBytes}).Read()
	if err != nil {
		return f.rowFault(err)
	}
	for i, name := range names {
		name = strings.TrimSpace(name)
		if !utf8.ValidString(name) {
			return f.malformed(1, fmt.Sprintf("the name of column %d is not UTF-8", i+1), "save the file as UTF-8")
		}
		f.fields = append(f.fields, events.Field{Name: name})
	}
	return nil
}

// delimiter counts the candidates in the first line that is not blank, outside
// quotes; the comma wins a tie.
func delimiter(head []byte) rune {
	head = bytes.TrimLeft(head, "\r\n")
	var comma, semicolon, tab int
	quoted := false
scan:
	for _, c := range head {
		switch {
		case c == '"':
			quoted = !quoted
		case quoted:
		case c == '\n' || c == '\r':
			break scan
		case c == ',':
			comma++
		case c == ';':
			semicolon++
		case c == '\t':
			tab++
		}
	}
	switch {
	case semicolon > comma && semicolon >= tab:
		return ';'
	case tab > comma:
		return '\t'
	}
	return ','
}

// bounded passes bytes on up to a point that moves with the rows read, so that
// a quote left open cannot pull the whole file into memory.
type bounded struct {
	r    io.Reader
	at   int64
	stop int64
}

var errLong = errors.New("row is too long")

func (b *bounded) Read(p []byte) (int, error) {
	if b.at >= b.stop {
		return 0, errLong
	}
	n, err := b.r.Read(p)
	b.at += int64(n)
	return n, err
}

// reader starts at the header row. The bound must be moved after every row.
func (f *File) reader(h io.Reader) (*csv.Reader, *bounded, error) {
	if f.skip > 0 {
		if _, err := io.CopyN(io.Discard, h, f.skip); err != nil {
			return nil, nil, f.broken(err)
		}
	}
	b := &bounded{r: h, stop: maxRowBytes}
	return f.csv(b), b, nil
}

func (f *File) csv(b *bounded) *csv.Reader {
	r := csv.NewReader(bufio.NewReaderSize(b, 64<<10))
	r.Comma = f.delim
	r.ReuseRecord = true
	return r
}

// step moves the bound past the row just read.
func (b *bounded) step(r *csv.Reader) { b.stop = r.InputOffset() + maxRowBytes + 64<<10 }

// rowFault turns an error of a row into a fault with its line and a remedy.
func (f *File) rowFault(err error) error {
	if errors.Is(err, io.EOF) {
		return f.malformed(0, "the file is empty", "a line of column names and rows are needed")
	}
	if errors.Is(err, errLong) {
		return f.malformed(0, fmt.Sprintf("a row is longer than %d bytes", maxRowBytes), "look for a quote that is not closed")
	}
	var p *csv.ParseError
	if !errors.As(err, &p) {
		return f.broken(err)
	}
	switch {
	case errors.Is(err, csv.ErrFieldCount):
		return f.malformed(p.Line, fmt.Sprintf("row does not have the %d cells of the header", len(f.fields)), "correct or remove the row")
	case errors.Is(err, csv.ErrQuote), errors.Is(err, csv.ErrBareQuote):
		return f.malformed(p.Line, "a quote is out of place", "double it or quote the whole cell")
	}
	return f.malformed(p.Line, p.Err.Error(), "correct or remove the row")
}

// inferTypes reads leading rows and tells numbers from text.
func (f *File) inferTypes(h io.Reader) error {
	r, b, err := f.reader(h)
	if err != nil {
		return err
	}
	r.FieldsPerRecord = len(f.fields)
	numbers := make([]int, len(f.fields))
	others := make([]int, len(f.fields))
	for row := 0; row <= sampleRows; row++ {
		rec, err := r.Read()
		if err == io.EOF {
			break
		}
		if err != nil {
			return f.rowFault(err)
		}
		b.step(r)
		if row == 0 {
			continue
		}
		for i, cell := range rec {
			if v := number(cell); events.IsNotAValue(v) {
				others[i]++
			} else if !events.IsNull(v) {
				numbers[i]++
			}
		}
	}
	for i := range f.fields {
		switch {
		case numbers[i] == 0 && others[i] == 0:
			f.fields[i].Type, f.fields[i].Numeric = "empty", true
		case numbers[i] >= 9*others[i] && numbers[i] > 0:
			f.fields[i].Type, f.fields[i].Numeric = "number", true
		default:
			f.fields[i].Type, f.fields[i].Class = "text", events.Text
		}
	}
	return nil
}

// Info describes the file; the number of rows is not known before reading.
func (f *File) Info() events.Info {
	return events.Info{Name: f.path, Format: f.format, Bytes: f.size, Rows: -1}
}

// Fields lists the columns in file order.
func (f *File) Fields() []events.Field { return append([]events.Field(nil), f.fields...) }

// Bounds is never known: text holds no statistics.
func (f *File) Bounds(string) (lo, hi float64, ok bool) { return 0, 0, false }

// Parts returns 1.
func (f *File) Parts() int { return 1 }

// PartRows returns -1: the rows are not known before reading.
func (f *File) PartRows(int) int64 { return -1 }

// Close does nothing: no handle is held between calls.
func (f *File) Close() error { return nil }
