package parquetfile

import (
	"bytes"
	"errors"
	"fmt"
	"io"

	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/snappy"
	"github.com/klauspost/compress/zstd"
	"github.com/pierrec/lz4/v4"
)

// Compression codecs as the format numbers them.
const (
	codecNone   = 0
	codecSnappy = 1
	codecGzip   = 2
	codecLZO    = 3
	codecBrotli = 4
	codecLZ4    = 5 // framed the Hadoop way, or not: no two writers agree
	codecZstd   = 6
	codecLZ4Raw = 7
)

// codecFault names a codec that is not read, "" for one that is.
func codecFault(codec int32) string {
	switch codec {
	case codecNone, codecSnappy, codecGzip, codecBrotli, codecZstd, codecLZ4Raw:
		return ""
	case codecLZO:
		return "LZO"
	case codecLZ4:
		return "LZ4 (the old framed form)"
	}
	return fmt.Sprintf("codec %d", codec)
}

// tooLarge is a size above a limit of Options.
type tooLarge struct {
	what        string
	size, limit int64
}

func (e *tooLarge) Error() string {
	return fmt.Sprintf("%s of %d bytes is above the limit of %d", e.what, e.size, e.limit)
}

var errUnpackedSize = errors.New("page unpacks to another size than its header says")

// unpacker decompresses pages; it keeps its decoders and is used by one
// goroutine at a time.
type unpacker struct {
	zstd *zstd.Decoder
	gzip *gzip.Reader
	src  bytes.Reader
}

// into unpacks src so that it fills dst exactly.
func (u *unpacker) into(dst, src []byte, codec int32) error {
	if len(src) == 0 && len(dst) == 0 {
		return nil
	}
	switch codec {
	case codecSnappy:
		n, err := snappy.DecodedLen(src)
		if err != nil {
			return err
		}
		if n != len(dst) {
			return errUnpackedSize
		}
		_, err = snappy.Decode(dst, src)
		return err
	case codecZstd:
		return u.zstdInto(dst, src)
	case codecLZ4Raw:
		n, err := lz4.UncompressBlock(src, dst)
		if err != nil {
			return err
		}
		if n != len(dst) {
			return errUnpackedSize
		}
		return nil
	case codecGzip:
		u.src.Reset(src)
		var err error
		if u.gzip == nil {
			u.gzip, err = gzip.NewReader(&u.src)
		} else {
			err = u.gzip.Reset(&u.src)
		}
		if err != nil {
			return err
		}
		return fillExactly(dst, u.gzip)
	case codecBrotli:
		c, err := compress.GetCodec(compress.Codecs.Brotli)
		if err != nil {
			return err
		}
		u.src.Reset(src)
		r := c.NewReader(&u.src)
		defer r.Close()
		return fillExactly(dst, r)
	}
	return errors.New("compression " + codecFault(codec) + " is not read")
}

func (u *unpacker) zstdInto(dst, src []byte) error {
	if u.zstd == nil {
		d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true),
			zstd.WithDecoderMaxMemory(1<<31), zstd.WithDecodeAllCapLimit(true), zstd.IgnoreChecksum(false))
		if err != nil {
			return err
		}
		u.zstd = d
	}
	out, err := u.zstd.DecodeAll(src, dst[:0:len(dst)])
	if err != nil {
		return err
	}
	if len(out) != len(dst) {
		return errUnpackedSize
	}
	return nil
}

// fillExactly reads dst full and then the end of the stream.
func fillExactly(dst []byte, r io.Reader) error {
	if _, err := io.ReadFull(r, dst); err != nil {
		return err
	}
	var one [1]byte
	for {
		n, err := r.Read(one[:])
		if n > 0 {
			return errUnpackedSize
		}
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
	}
}
