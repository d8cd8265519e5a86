package csvfile

import (
	"strings"

	"drumlin/io/events"
)

// code returns the number of a cell's text, events.Null for an empty one.
func code(w *events.Words, cell string) float64 {
	cell = strings.TrimSpace(cell)
	if cell == "" || len(cell) == 2 && strings.EqualFold(cell, "na") || len(cell) == 4 && strings.EqualFold(cell, "null") {
		return events.Null
	}
	return w.CodeText(cell)
}
