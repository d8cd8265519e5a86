package events

import (
	"bytes"
	"unicode/utf8"
)

// Formats that Sniff tells apart.
const (
	FormatParquet     = "parquet"
	FormatCSV         = "csv"
	FormatArrowFile   = "arrow-file"
	FormatArrowStream = "arrow-stream"
	FormatGzip        = "gzip"
	FormatZstd        = "zstd"
	FormatEmpty       = "empty"
	FormatUnknown     = "unknown"
)

// Sniff names the format of an input from its first bytes (some hundreds are
// enough) and its last ones (8 are enough; nil where the end is not known, as
// in a stream). The name of a file plays no part. A file that only starts or
// only ends like Parquet is "parquet": its reader says what is wrong with it.
func Sniff(head, tail []byte) string {
	if len(head) == 0 {
		return FormatEmpty
	}
	starts := func(s string) bool { return bytes.HasPrefix(head, []byte(s)) }
	ends := func(s string) bool { return bytes.HasSuffix(tail, []byte(s)) }
	switch {
	case starts("PAR1"), starts("PARE"):
		return FormatParquet
	case starts("ARROW1"):
		return FormatArrowFile
	case starts("\xff\xff\xff\xff"):
		return FormatArrowStream
	case starts("\x1f\x8b"):
		return FormatGzip
	case starts("\x28\xb5\x2f\xfd"):
		return FormatZstd
	case looksLikeText(head):
		return FormatCSV
	case ends("PAR1"), ends("PARE"):
		return FormatParquet
	}
	return FormatUnknown
}

// looksLikeText accepts UTF-8 without control characters; a rune cut by the
// end of the head is not held against it.
func looksLikeText(head []byte) bool {
	for i := 0; i < len(head); {
		c := head[i]
		if c < 0x20 && c != '\t' && c != '\n' && c != '\r' || c == 0x7f {
			return false
		}
		if c < utf8.RuneSelf {
			i++
			continue
		}
		r, n := utf8.DecodeRune(head[i:])
		if r == utf8.RuneError && n == 1 {
			return !utf8.FullRune(head[i:])
		}
		i += n
	}
	return true
}
