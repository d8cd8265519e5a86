package events

import (
	"strings"
	"unicode/utf8"
)

// maxWordBytes is the longest text kept; longer ones are cut, for they are no
// names of anything.
const maxWordBytes = 1 << 16

// Words gives texts the numbers that stand for them in a Batch. The zero value
// is empty. It is not safe for sharing.
type Words struct {
	list []string
	at   map[string]int // of the texts after the kept ones
	kept int
}

// Code returns the number of a text; it keeps no reference to b. Bytes that are
// no UTF-8 become U+FFFD.
func (w *Words) Code(b []byte) float64 {
	if i, ok := w.at[string(b)]; ok {
		return float64(i)
	}
	return w.add(string(b))
}

// CodeText is Code for a string, whose memory may be used again.
func (w *Words) CodeText(s string) float64 {
	if i, ok := w.at[s]; ok {
		return float64(i)
	}
	return w.add(strings.Clone(s))
}

func (w *Words) add(s string) float64 {
	if len(s) > maxWordBytes {
		s = s[:maxWordBytes]
	}
	if w.at == nil {
		w.at = map[string]int{}
	}
	w.at[s] = len(w.list)
	if !utf8.ValidString(s) {
		s = strings.ToValidUTF8(s, "\uFFFD")
	}
	w.list = append(w.list, s)
	return float64(len(w.list) - 1)
}

// Keep makes the numbers given so far, those of a dictionary, outlive Next.
func (w *Words) Keep() {
	w.kept = len(w.list)
	clear(w.at)
}

// Next starts a batch: numbers given since Keep are no longer in use.
func (w *Words) Next() {
	if len(w.list) > w.kept {
		clear(w.list[w.kept:])
		clear(w.at)
		w.list = w.list[:w.kept]
	}
}

// List returns the texts by number, for Batch.Words; Next makes it invalid.
func (w *Words) List() []string { return w.list }
