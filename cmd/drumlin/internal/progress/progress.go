// Package progress tells a person, or a program, how far a run has come.
// Everything goes to one writer (stderr): a changing line on a terminal, JSON
// lines on request, nothing else in between.
package progress

import (
	"encoding/json"
	"fmt"
	"io"
	"sync"
	"sync/atomic"
	"time"
)

// Mode says how progress is shown.
type Mode int

// Modes.
const (
	Silent   Mode = iota
	Terminal      // one line that changes
	JSON          // a line per message, an object with a member "type"
)

// Reporter is safe for concurrent use. Close ends it and clears the line.
type Reporter struct {
	w     io.Writer
	mode  Mode
	start time.Time

	rows  atomic.Int64
	total atomic.Int64 // rows expected, 0 when unknown

	mu    sync.Mutex
	stage string
	shown bool
	stop  chan struct{}
	done  sync.WaitGroup
}

// New starts a reporter.
func New(w io.Writer, mode Mode) *Reporter {
	r := &Reporter{w: w, mode: mode, start: time.Now(), stop: make(chan struct{})}
	if mode != Silent {
		r.done.Go(r.tick)
	}
	return r
}

// Expect says how many rows there are to read.
func (r *Reporter) Expect(rows int64) { r.total.Store(rows) }

// Rows adds rows read.
func (r *Reporter) Rows(n int64) { r.rows.Add(n) }

// Stage says what is being done now.
func (r *Reporter) Stage(name string) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.stage == name {
		return
	}
	r.stage = name
	if r.mode == JSON {
		r.line(map[string]any{"type": "stage", "stage": name, "seconds": r.seconds()})
	}
}

// Warn passes a warning on, in every mode.
func (r *Reporter) Warn(text string) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.mode == JSON {
		r.line(map[string]any{"type": "warning", "message": text})
		return
	}
	r.clear()
	fmt.Fprintln(r.w, "drumlin: warning: "+text)
}

// Close stops the reporter.
func (r *Reporter) Close() {
	select {
	case <-r.stop:
		return
	default:
	}
	close(r.stop)
	r.done.Wait()
	r.mu.Lock()
	defer r.mu.Unlock()
	r.clear()
}

func (r *Reporter) tick() {
	every := 200 * time.Millisecond
	if r.mode == JSON {
		every = 2 * time.Second
	}
	t := time.NewTicker(every)
	defer t.Stop()
	for {
		select {
		case <-r.stop:
			return
		case <-t.C:
			r.show()
		}
	}
}

func (r *Reporter) show() {
	r.mu.Lock()
	defer r.mu.Unlock()
	rows, total, seconds := r.rows.Load(), r.total.Load(), r.seconds()
	rate := float64(rows) / max(seconds, 1e-3)
	left := 0.0
	if total > rows && rate > 0 {
		left = float64(total-rows) / rate
	}
	if r.mode == JSON {
		m := map[string]any{"type": "progress", "stage": r.stage, "rows": rows, "rows_per_second": int64(rate), "seconds": seconds}
		if total > 0 {
			m["rows_expected"], m["seconds_left"] = total, int64(left+0.5)
		}
		r.line(m)
		return
	}
	if seconds < 1 {
		return // short runs stay quiet
	}
	text := fmt.Sprintf("%s: %s rows", r.stage, Count(rows))
	if total > 0 && rows < total {
		text = fmt.Sprintf("%s of %s, %s a second, about %.0f s left", text, Count(total), Count(int64(rate)), left)
	}
	fmt.Fprintf(r.w, "\r\x1b[K%s", text)
	r.shown = true
}

func (r *Reporter) seconds() float64 {
	return float64(time.Since(r.start).Round(time.Millisecond)) / float64(time.Second)
}

func (r *Reporter) clear() {
	if r.shown {
		fmt.Fprint(r.w, "\r\x1b[K")
		r.shown = false
	}
}

func (r *Reporter) line(m map[string]any) {
	b, err := json.Marshal(m)
	if err != nil {
		return // maps of strings and numbers always marshal
	}
	fmt.Fprintf(r.w, "%s\n", b)
}

// Count prints a whole number with thin grouping: 12,345,678.
func Count(n int64) string {
	s := fmt.Sprint(n)
	neg := ""
	if n < 0 {
		neg, s = "-", s[1:]
	}
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return neg + s
}
