package csvfile

import (
	"strings"

	"drumlin/io/events"
)

// words lists the texts of one column in one batch.
type words struct {
	list []string
	at   map[string]int
}

// code returns the place of a cell in the list, events.Null for an empty one.
func (w *words) code(cell string) float64 {
	cell = strings.TrimSpace(cell)
	if cell == "" || len(cell) == 2 && strings.EqualFold(cell, "na") || len(cell) == 4 && strings.EqualFold(cell, "null") {
		return events.Null
	}
	if i, ok := w.at[cell]; ok {
		return float64(i)
	}
	if w.at == nil {
		w.at = map[string]int{}
	}
	s := strings.ToValidUTF8(strings.Clone(cell), "\uFFFD") // the row's memory is used again
	w.at[s] = len(w.list)
	w.list = append(w.list, s)
	return float64(len(w.list) - 1)
}

// next starts a batch.
func (w *words) next() {
	clear(w.list)
	clear(w.at)
	w.list = w.list[:0]
}
