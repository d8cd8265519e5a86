package record

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"io"
	"os"
)

// Digest is a checksum and what it covers.
type Digest struct {
	Algorithm string `json:"algorithm"` // "sha256", or "none" for a stream that was not hashed
	Scope     string `json:"scope"`     // ScopeWhole or ScopeSampled
	Value     string `json:"value"`     // hexadecimal, lower case
}

// Scopes of a Digest.
const (
	// ScopeWhole: every byte of the file.
	ScopeWhole = "whole file"
	// ScopeSampled: the size as 8 bytes, little end first; then 64 blocks of
	// 1 MiB, block i of 0..63 starting at floor(i*(size-1 MiB)/63), so the first
	// and the last MiB are always in.
	ScopeSampled = "size and 64 evenly spaced blocks of 1 MiB, first and last included"
)

// WholeLimit is the greatest size FileDigest reads in full, in bytes.
const WholeLimit = 64 << 20

const (
	sampleBlock  = 1 << 20
	sampleBlocks = 64
)

// FileDigest returns the digest of the file and its size in bytes: whole up to
// WholeLimit, sampled above. A sampled digest tells extracts apart; it does not
// prove that a file was not altered between its blocks.
func FileDigest(path string) (Digest, int64, error) { return FileDigestUpTo(path, WholeLimit) }

// FileDigestUpTo is FileDigest with another limit for the whole-file scope;
// limit < 0 always reads everything. Only a size above both the limit and
// 64 MiB is sampled.
func FileDigestUpTo(path string, limit int64) (Digest, int64, error) {
	f, err := os.Open(path)
	if err != nil {
		return Digest{}, 0, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return Digest{}, 0, err
	}
	if !info.Mode().IsRegular() {
		return Digest{}, 0, fmt.Errorf("record: digest: %s is not a regular file", path)
	}
	size := info.Size()
	if limit >= 0 && size > max(limit, sampleBlocks*sampleBlock) {
		d, err := sampled(f, size)
		return d, size, err
	}
	h := sha256.New()
	n, err := io.CopyBuffer(h, onlyReader{f}, make([]byte, 1<<18))
	if err != nil {
		return Digest{}, 0, fmt.Errorf("record: digest: %s: %w", path, err)
	}
	return Digest{"sha256", ScopeWhole, hex.EncodeToString(h.Sum(nil))}, n, nil
}

type onlyReader struct{ io.Reader }

func sampled(f io.ReaderAt, size int64) (Digest, error) {
	h := sha256.New()
	h.Write(binary.LittleEndian.AppendUint64(nil, uint64(size)))
	buf := make([]byte, sampleBlock)
	span := size - sampleBlock
	for i := range int64(sampleBlocks) {
		// i*span/63 without overflow for any size
		at := span/(sampleBlocks-1)*i + span%(sampleBlocks-1)*i/(sampleBlocks-1)
		if _, err := f.ReadAt(buf, at); err != nil {
			return Digest{}, fmt.Errorf("record: digest: byte %d: %w", at, err)
		}
		h.Write(buf)
	}
	return Digest{"sha256", ScopeSampled, hex.EncodeToString(h.Sum(nil))}, nil
}
