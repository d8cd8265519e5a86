package arrowfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"

	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
)

// Options bounds what an input may make the reader do. The zero value is the
// default of every field.
type Options struct {
	MaxMetadataBytes int64 // largest metadata of a message; default 16 MiB
	MaxBodyBytes     int64 // largest body of a message; default 1 GiB
	MaxUnpackedBytes int64 // most memory while one message is decoded; default 4 GiB
}

func (o Options) filled() Options {
	if o.MaxMetadataBytes <= 0 {
		o.MaxMetadataBytes = 16 << 20
	}
	o.MaxMetadataBytes = min(o.MaxMetadataBytes, 1<<31-1)
	if o.MaxBodyBytes <= 0 {
		o.MaxBodyBytes = 1 << 30
	}
	if o.MaxUnpackedBytes <= 0 {
		o.MaxUnpackedBytes = 4 << 30
	}
	return o
}

// errLimit marks something larger than a limit of Options.
var errLimit = errors.New("above the limit of this reader")

// capped is an allocator that panics with errLimit once more than its room is
// taken in one message; reset gives the room back. Not safe for sharing.
type capped struct {
	memory.GoAllocator
	room, left int64
}

func (a *capped) reset() { a.left = a.room }

func (a *capped) take(n int) {
	if n < 0 {
		panic(errors.New("negative length"))
	}
	if int64(n) > a.left {
		panic(fmt.Errorf("a message takes more than %d bytes: %w", a.room, errLimit))
	}
	a.left -= int64(n)
}

// Allocate implements memory.Allocator.
func (a *capped) Allocate(n int) []byte {
	a.take(n)
	return a.GoAllocator.Allocate(n)
}

// Reallocate implements memory.Allocator.
func (a *capped) Reallocate(n int, b []byte) []byte {
	a.take(n)
	return a.GoAllocator.Reallocate(n, b)
}

// messages frames the messages of a stream of known length.
type messages struct {
	r     io.Reader
	left  int64 // bytes of the input not read yet
	opt   Options
	alloc *capped
	last  *ipc.Message
	word  [4]byte
}

// Retain and Release implement ipc.MessageReader; the memory is the collector's.
func (m *messages) Retain() {}

// Release implements ipc.MessageReader.
func (m *messages) Release() {}

func (m *messages) full(b []byte) error {
	n, err := io.ReadFull(m.r, b)
	m.left -= int64(n)
	return err
}

// Message implements ipc.MessageReader: the next message, or io.EOF after the
// end mark or where the input ends between messages.
func (m *messages) Message() (*ipc.Message, error) {
	m.alloc.reset()
	if m.left == 0 {
		return nil, io.EOF
	}
	if err := m.full(m.word[:]); err != nil {
		return nil, fmt.Errorf("the input ends within a message: %w", err)
	}
	size := binary.LittleEndian.Uint32(m.word[:])
	if size == 0xffffffff {
		if err := m.full(m.word[:]); err != nil {
			return nil, fmt.Errorf("the input ends within a message: %w", err)
		}
		size = binary.LittleEndian.Uint32(m.word[:])
	}
	if size == 0 {
		return nil, io.EOF
	}
	if int64(size) > m.left {
		return nil, fmt.Errorf("a message's metadata of %d bytes where %d are left", size, m.left)
	}
	if int64(size) > m.opt.MaxMetadataBytes {
		return nil, fmt.Errorf("a message's metadata of %d bytes, at most %d: %w", size, m.opt.MaxMetadataBytes, errLimit)
	}
	meta := make([]byte, size)
	if err := m.full(meta); err != nil {
		return nil, fmt.Errorf("the input ends within a message: %w", err)
	}
	length, err := checkMetadata(meta)
	if err != nil {
		return nil, err
	}
	if length > m.left {
		return nil, fmt.Errorf("a message's body of %d bytes where %d are left", length, m.left)
	}
	if length > m.opt.MaxBodyBytes {
		return nil, fmt.Errorf("a message's body of %d bytes, at most %d: %w", length, m.opt.MaxBodyBytes, errLimit)
	}
	body := make([]byte, length)
	if err := m.full(body); err != nil {
		return nil, fmt.Errorf("the input ends within a message: %w", err)
	}
	m.last = ipc.NewMessage(memory.NewBufferBytes(meta), memory.NewBufferBytes(body))
	return m.last, nil
}
