package parquetfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"

	"drumlin/io/events"
)

// footer is the file's metadata after the walk: safe to hand to the library.
type footer struct {
	raw       []byte          // compact bytes, unknown logical types cut out
	dropped   map[int]dropped // by leaf index: what was cut out
	encrypted bool            // some module of the file is encrypted
	end       int64           // file offset where the footer starts
}

// dropped is a logical type the library does not know.
type dropped struct {
	id  int16  // member of the LogicalType union
	crs string // for geometry and geography: the CRS as the file states it
}

const (
	logicalVariant   = 16
	logicalGeometry  = 17
	logicalGeography = 18
)

func (d dropped) String() string {
	switch d.id {
	case logicalVariant:
		return "VARIANT"
	case logicalGeometry:
		return "GEOMETRY"
	case logicalGeography:
		return "GEOGRAPHY"
	}
	return fmt.Sprintf("logical type %d", d.id)
}

// readFooter fetches and walks the footer. Faults carry no file name yet.
func readFooter(r io.ReaderAt, size int64, opt Options) (*footer, *events.Fault) {
	bad := func(what string) *events.Fault {
		return &events.Fault{Kind: events.ErrMalformed, What: what, Remedy: "write the file again or leave it out"}
	}
	if size == 0 {
		return nil, bad("the file is empty")
	}
	var head, tail [8]byte
	if size < 12 {
		return nil, bad(fmt.Sprintf("not a Parquet file: only %d bytes", size))
	}
	if err := readFull(r, head[:], 0); err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, What: "cannot be read", Cause: err}
	}
	if err := readFull(r, tail[:], size-8); err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, What: "cannot be read", Cause: err}
	}
	switch string(tail[4:]) {
	case "PAR1":
	case "PARE":
		return nil, &events.Fault{Kind: events.ErrUnsupported, What: "the file is encrypted", Remedy: "write it again without encryption"}
	default:
		if string(head[:4]) == "PAR1" {
			return nil, bad("Parquet file cut short: its last bytes are not PAR1")
		}
		return nil, bad("not a Parquet file: its content looks like " + looks(r, size))
	}
	if string(head[:4]) != "PAR1" {
		return nil, bad("not a Parquet file: it does not start with PAR1")
	}
	n := int64(binary.LittleEndian.Uint32(tail[:4]))
	if n > size-12 {
		return nil, bad(fmt.Sprintf("footer of %d bytes in a file of %d", n, size))
	}
	if n > opt.MaxFooterBytes {
		return nil, &events.Fault{Kind: events.ErrUnsupported,
			What: fmt.Sprintf("footer of %d bytes is above the limit of %d", n, opt.MaxFooterBytes), Remedy: "split the file"}
	}
	raw := make([]byte, n)
	if err := readFull(r, raw, size-8-n); err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, What: "footer cannot be read", Cause: err}
	}
	f, err := walkFooter(raw)
	if err != nil {
		fault := bad("footer is broken")
		fault.Cause = err
		return nil, fault
	}
	f.end = size - 8 - n
	return f, nil
}

func looks(r io.ReaderAt, size int64) string {
	b := make([]byte, min(size, 512))
	if readFull(r, b, 0) != nil {
		return "nothing known"
	}
	switch s := events.Sniff(b, nil); s {
	case events.FormatCSV:
		return "text"
	case events.FormatUnknown:
		return "nothing known"
	default:
		return s
	}
}

func readFull(r io.ReaderAt, b []byte, at int64) error {
	n, err := r.ReadAt(b, at)
	if n == len(b) {
		return nil
	}
	if err == nil || errors.Is(err, io.EOF) {
		return io.ErrUnexpectedEOF
	}
	return err
}

// walkFooter checks the whole of the metadata struct and cuts unknown logical
// types out of the schema.
func walkFooter(raw []byte) (*footer, error) {
	f := &footer{dropped: map[int]dropped{}}
	c := &cursor{b: raw}
	var last int16
	schemaAt, schemaEnd := -1, -1
	var rewritten []byte
	seen := map[int16]bool{}
	for {
		id, typ, ok := c.field(&last)
		if !ok {
			break
		}
		if seen[id] {
			return nil, fmt.Errorf("field %d occurs twice", id)
		}
		seen[id] = true
		start := c.i
		switch {
		case id == 2 && typ == tList:
			var err error
			if rewritten, err = f.walkSchema(c); err != nil {
				return nil, err
			}
			schemaAt, schemaEnd = start, c.i
		case id == 8:
			f.encrypted = true
			c.skip(typ, 0)
		default:
			c.skip(typ, 0)
		}
	}
	if c.err != nil {
		return nil, c.err
	}
	if schemaAt < 0 {
		return nil, errors.New("no schema")
	}
	if len(f.dropped) == 0 {
		f.raw = raw
		return f, nil
	}
	f.raw = append(f.raw, raw[:schemaAt]...)
	f.raw = append(f.raw, rewritten...)
	f.raw = append(f.raw, raw[schemaEnd:]...)
	return f, nil
}

// walkSchema reads the list of schema elements, checks that it is one tree,
// not too deep, and returns the list without unknown logical types.
func (f *footer) walkSchema(c *cursor) ([]byte, error) {
	at := c.i
	n, elem := c.list()
	if c.err == nil && (elem != tStruct || n == 0) {
		return nil, errors.New("schema is not a list of elements")
	}
	out := append([]byte(nil), c.b[at:c.i]...)
	var open []int32 // children still to come, by depth
	leaves := 0
	for k := 0; k < n; k++ {
		if k > 0 && len(open) == 0 {
			return nil, errors.New("schema has elements outside its tree")
		}
		children, drop, err := copyElement(c, &out)
		if err != nil {
			return nil, err
		}
		if children < 0 || int(children) > n {
			return nil, fmt.Errorf("schema element %d claims %d children", k, children)
		}
		if drop.id != 0 && children == 0 {
			f.dropped[leaves] = drop
		} else if drop.id != 0 {
			f.dropped[-1-k] = drop // a group: nothing to look up, but it was cut out
		}
		if k > 0 {
			open[len(open)-1]--
			if children == 0 {
				leaves++
			}
		}
		if children > 0 {
			open = append(open, children)
		}
		if len(open) > maxNesting {
			return nil, errors.New("schema is nested too deeply")
		}
		for len(open) > 0 && open[len(open)-1] == 0 {
			open = open[:len(open)-1]
		}
	}
	if len(open) > 0 {
		return nil, errors.New("schema ends before its tree is complete")
	}
	return out, c.err
}

// copyElement copies one schema element without an unknown logical type.
func copyElement(c *cursor, out *[]byte) (children int32, drop dropped, err error) {
	var last, lastOut int16
	for {
		id, typ, ok := c.field(&last)
		if !ok {
			break
		}
		start := c.i
		switch {
		case id == 5 && typ == tI32:
			children = c.i32(typ)
		case id == 10 && typ == tStruct:
			drop = walkLogical(c)
		default:
			c.skip(typ, 1)
		}
		if c.err != nil {
			return 0, drop, c.err
		}
		if id == 10 && drop.id != 0 {
			continue
		}
		if d := id - lastOut; d > 0 && d < 16 {
			*out = append(*out, byte(d)<<4|typ)
		} else {
			*out = append(*out, typ)
			*out = binary.AppendUvarint(*out, uint64(uint16(id<<1^id>>15)))
		}
		lastOut = id
		*out = append(*out, c.b[start:c.i]...)
	}
	*out = append(*out, 0)
	return children, drop, c.err
}

// walkLogical reads a LogicalType union; the id is set when the library does
// not know the member (-1 for a union without one).
func walkLogical(c *cursor) dropped {
	var last int16
	d := dropped{id: -1}
	for {
		id, typ, ok := c.field(&last)
		if !ok {
			return d
		}
		d.id = 0
		if id < 1 || id == 9 || id > 15 || typ != tStruct {
			d.id = id
			if id == 0 {
				d.id = -1
			}
		}
		if (id == logicalGeometry || id == logicalGeography) && typ == tStruct {
			var l int16
			for {
				fid, ft, ok := c.field(&l)
				if !ok {
					break
				}
				if fid == 1 && ft == tBinary {
					d.crs = string(c.bytes())
				} else {
					c.skip(ft, 3)
				}
			}
			continue
		}
		c.skip(typ, 2)
	}
}
