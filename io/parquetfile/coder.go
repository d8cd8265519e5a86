package parquetfile

import "strings"

// Coder turns stored byte strings into numbers, so that columns of text or of
// binary geometry travel on the same path as columns of numbers.
type Coder interface {
	// Code returns the number that stands for b. It must not keep b.
	Code(b []byte) float64
	// Keep makes the codes given so far, those of a dictionary, outlive Next.
	Keep()
	// Next starts a batch: codes given since Keep are no longer in use.
	Next()
}

// maxWordBytes is the longest text kept; longer ones are cut, for they are no
// names of anything.
const maxWordBytes = 1 << 16

// words codes text as places in a list.
type words struct {
	list []string
	at   map[string]int // of the words after the kept ones
	kept int
}

// Code interns b; bytes that are no UTF-8 become U+FFFD.
func (w *words) Code(b []byte) float64 {
	if len(b) > maxWordBytes {
		b = b[:maxWordBytes]
	}
	if i, ok := w.at[string(b)]; ok {
		return float64(i)
	}
	s := string(b)
	if w.at == nil {
		w.at = map[string]int{}
	}
	w.at[s] = len(w.list)
	w.list = append(w.list, strings.ToValidUTF8(s, "\uFFFD"))
	return float64(len(w.list) - 1)
}

func (w *words) Keep() { w.kept = len(w.list) }

func (w *words) Next() {
	if len(w.list) > w.kept {
		clear(w.list[w.kept:])
		clear(w.at)
		w.list = w.list[:w.kept]
	}
}
