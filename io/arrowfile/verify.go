package arrowfile

import (
	"encoding/binary"
	"errors"
	"fmt"
)

// The library trusts the lengths in a message's metadata, which is a
// flatbuffer, and allocates by them. So every vector is checked here first: it
// must lie within the metadata. Offsets that point outside are caught by the
// bounds of the slice; the caller turns the panic into an error.
//
// Source: the flatbuffers binary format; Message.fbs and Schema.fbs of the
// Arrow format for the numbers of the fields.

// table is a flatbuffer table.
type table struct {
	b   []byte
	pos int
}

func u16(b []byte, at int) int { return int(binary.LittleEndian.Uint16(b[at:])) }
func u32(b []byte, at int) int { return int(binary.LittleEndian.Uint32(b[at:])) }

// field returns where field i is stored, 0 when it is left out.
func (t table) field(i int) int {
	fields := t.pos - int(int32(binary.LittleEndian.Uint32(t.b[t.pos:])))
	entry := 4 + 2*i
	if entry+2 > u16(t.b, fields) {
		return 0
	}
	off := u16(t.b, fields+entry)
	if off == 0 {
		return 0
	}
	return t.pos + off
}

// child returns the table that field i points to.
func (t table) child(i int) (table, bool) {
	at := t.field(i)
	if at == 0 {
		return table{}, false
	}
	return table{t.b, at + u32(t.b, at)}, true
}

// vector returns start and length of a vector of elements of the given size.
func (t table) vector(i, size int) (start, n int) {
	at := t.field(i)
	if at == 0 {
		return 0, 0
	}
	at += u32(t.b, at)
	n = u32(t.b, at)
	if n > (len(t.b)-at-4)/size {
		panic(fmt.Errorf("a vector of %d elements in metadata of %d bytes", n, len(t.b)))
	}
	return at + 4, n
}

const (
	maxDepth  = 32
	maxFields = 100_000
	unionType = 14 // number of Union among the types of Schema.fbs
)

// checkMetadata checks a message's vectors and returns the length of its body.
func checkMetadata(b []byte) (int64, error) {
	if len(b) < 8 {
		return 0, errors.New("a message's metadata is too short")
	}
	m := table{b, u32(b, 0)}
	kind := 0
	if at := m.field(1); at != 0 {
		kind = int(b[at])
	}
	m.vector(4, 4)
	header, ok := m.child(2)
	if !ok {
		return 0, errors.New("a message without content")
	}
	switch kind {
	case 1: // schema
		checkKeyValues(header, 2)
		header.vector(3, 8)
		count := 0
		if err := checkFields(header, 1, 0, &count); err != nil {
			return 0, err
		}
	case 2: // dictionary batch
		if data, ok := header.child(1); ok {
			checkBatch(data)
		}
	case 3:
		checkBatch(header)
	default:
		return 0, fmt.Errorf("a message of kind %d", kind)
	}
	at := m.field(3)
	if at == 0 {
		return 0, nil
	}
	length := int64(binary.LittleEndian.Uint64(b[at:]))
	if length < 0 {
		return 0, fmt.Errorf("a message's body of %d bytes", length)
	}
	return length, nil
}

func checkBatch(t table) {
	t.vector(1, 16) // field nodes
	t.vector(2, 16) // buffers
	t.vector(4, 8)  // counts of variadic buffers
}

// checkFields checks the vector of fields at field i of t, and their children.
func checkFields(t table, i, depth int, count *int) error {
	if depth > maxDepth {
		return fmt.Errorf("columns nested more than %d deep: %w", maxDepth, errLimit)
	}
	start, n := t.vector(i, 4)
	if *count += n; *count > maxFields {
		return fmt.Errorf("more than %d columns: %w", maxFields, errLimit)
	}
	for k := range n {
		at := start + 4*k
		f := table{t.b, at + u32(t.b, at)}
		f.vector(0, 1)
		checkKeyValues(f, 6)
		if at := f.field(2); at != 0 && t.b[at] == unionType {
			if u, ok := f.child(3); ok {
				u.vector(1, 4) // its type ids
			}
		}
		if err := checkFields(f, 5, depth+1, count); err != nil {
			return err
		}
	}
	return nil
}

func checkKeyValues(t table, i int) {
	start, n := t.vector(i, 4)
	for k := range n {
		at := start + 4*k
		kv := table{t.b, at + u32(t.b, at)}
		kv.vector(0, 1)
		kv.vector(1, 1)
	}
}
