package main_test

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/testscript"

	"drumlin/io/bundle"
	"drumlin/io/parquetfile"
)

// TestScript runs the program as people run it. The scripts under long/ are
// left out with -short.
func TestScript(t *testing.T) {
	runScripts(t, filepath.Join("testdata", "script"))
}

func TestLongScript(t *testing.T) {
	if testing.Short() {
		t.Skip("long scripts are left out with -short")
	}
	runScripts(t, filepath.Join("testdata", "script", "long"))
}

func runScripts(t *testing.T, dir string) {
	data, err := filepath.Abs(filepath.Join("..", "..", "testdata", "events"))
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir:                dir,
		ContinueOnError:    true,
		RequireUniqueNames: true,
		Setup: func(env *testscript.Env) error {
			env.Setenv("DATA", data)
			if testing.Short() || filepath.Base(dir) == "script" {
				env.Setenv("DRUMLIN_SENSITIVITY", "false") // half the time
			}
			return nil
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"events":      cmdEvents,
			"columns":     cmdColumns,
			"split":       cmdSplit,
			"cut":         cmdCut,
			"refuses":     cmdRefuses,
			"locked":      cmdLocked,
			"interrupted": cmdInterrupted,
			"same":        cmdSame,
			"record":      cmdRecord,
			"setaside":    cmdSetAside,
			"balanced":    cmdBalanced,
			"jsonlines":   cmdJSONLines,
			"empty":       cmdEmpty,
			"extract":     cmdExtract,
			"pack":        cmdPack,
			"join":        cmdJoin,
		},
	})
}

// table is a run of equally long columns that can be written as Parquet or CSV
// with the same values.
type table struct {
	names []string
	cols  [][]float64
}

func (tb table) rows() int { return len(tb.cols[0]) }

func (tb table) slice(lo, hi int) table {
	out := table{names: tb.names}
	for _, c := range tb.cols {
		out.cols = append(out.cols, c[lo:hi])
	}
	return out
}

// write writes the table in the format that the name's ending says.
func (tb table) write(path string, groupRows int) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	if strings.HasSuffix(path, ".parquet") {
		var cols []parquetfile.Column
		for i, n := range tb.names {
			cols = append(cols, parquetfile.Column{Name: n, Floats: tb.cols[i]})
		}
		return parquetfile.Write(f, cols, parquetfile.WriteOptions{RowGroupRows: groupRows})
	}
	w := bufio.NewWriter(f)
	fmt.Fprintln(w, strings.Join(tb.names, ","))
	for i := range tb.rows() {
		for k, c := range tb.cols {
			if k > 0 {
				w.WriteByte(',')
			}
			w.WriteString(strconv.FormatFloat(c[i], 'g', -1, 64))
		}
		w.WriteByte('\n')
	}
	return w.Flush()
}

// cloud draws n events from a seeded mixture of slanted normals: in degrees
// about lon, lat, or in metres with plane. span is the rough width in degrees or
// metres. Weights are whole and half numbers from 0.5 to 8.
func cloud(n int, seed uint64, lon, lat, span float64, plane, weighted bool) table {
	r := rand.New(rand.NewPCG(seed, 17))
	tb := table{names: []string{"lon", "lat"}, cols: [][]float64{make([]float64, n), make([]float64, n)}}
	if plane {
		tb.names = []string{"x", "y"}
	}
	if weighted {
		tb.names = append(tb.names, "w")
		tb.cols = append(tb.cols, make([]float64, n))
	}
	type bump struct{ x, y, sx, sy, slant, p float64 }
	bumps := []bump{
		{-0.20, 0.10, 0.050, 0.120, 0.7, 0.35},
		{0.15, -0.15, 0.090, 0.040, -0.5, 0.30},
		{0.22, 0.20, 0.035, 0.035, 0, 0.15},
		{0, 0, 0.200, 0.200, 0, 0.20},
	}
	for i := range n {
		u, b := r.Float64(), bumps[len(bumps)-1]
		for _, c := range bumps {
			if u -= c.p; u < 0 {
				b = c
				break
			}
		}
		g, h := r.NormFloat64(), r.NormFloat64()
		tb.cols[0][i] = lon + span*(b.x+b.sx*g)
		tb.cols[1][i] = lat + span*(b.y+b.sy*(b.slant*g+math.Sqrt(1-b.slant*b.slant)*h))
		if weighted {
			tb.cols[2][i] = 0.5 * float64(1+r.IntN(16))
		}
	}
	return tb
}

// cmdEvents: events FILE... [-n N] [-seed S] [-at lon,lat] [-span D] [-plane]
// [-weighted] [-group ROWS]. Each FILE is written with the same rows.
func cmdEvents(ts *testscript.TestScript, neg bool, args []string) {
	var files []string
	for len(args) > 0 && !strings.HasPrefix(args[0], "-") {
		files, args = append(files, ts.MkAbs(args[0])), args[1:]
	}
	f := flag.NewFlagSet("events", flag.ContinueOnError)
	n := f.Int("n", 2000, "rows")
	seed := f.Uint64("seed", 1, "seed")
	at := f.String("at", "10.3,50.2", "centre")
	span := f.Float64("span", 1, "width")
	plane := f.Bool("plane", false, "metres without a place")
	weighted := f.Bool("weighted", false, "with a column w")
	group := f.Int("group", 0, "rows of a row group")
	ts.Check(f.Parse(args))
	first, second, _ := strings.Cut(*at, ",")
	lon, err := strconv.ParseFloat(first, 64)
	ts.Check(err)
	lat, err := strconv.ParseFloat(second, 64)
	ts.Check(err)
	tb := cloud(*n, *seed, lon, lat, *span, *plane, *weighted)
	for _, file := range files {
		ts.Check(tb.write(file, *group))
	}
}

// cmdColumns: columns FILE name=v,v,v... writes one Parquet file or CSV; a
// column whose values are not all numbers is text (Parquet only). "v*9" stands
// for nine times v.
func cmdColumns(ts *testscript.TestScript, neg bool, args []string) {
	path := ts.MkAbs(args[0])
	var cols []parquetfile.Column
	for _, a := range args[1:] {
		name, list, ok := strings.Cut(a, "=")
		if !ok {
			ts.Fatalf("columns: cannot read %q", a)
		}
		c := parquetfile.Column{Name: name}
		for v := range strings.SplitSeq(list, ",") {
			times := 1
			if value, count, ok := strings.Cut(v, "*"); ok {
				var err error
				times, err = strconv.Atoi(count)
				ts.Check(err)
				v = value
			}
			x, err := strconv.ParseFloat(v, 64)
			if err != nil {
				c.Type = parquetfile.Text
			}
			for range times {
				c.Texts = append(c.Texts, v)
				c.Floats = append(c.Floats, x)
			}
		}
		cols = append(cols, c)
	}
	f, err := os.Create(path)
	ts.Check(err)
	defer f.Close()
	ts.Check(parquetfile.Write(f, cols, parquetfile.WriteOptions{}))
}

// cmdSplit: split FILE.csv DIR N.ext deals the rows of a CSV file of numbers
// over N files, unevenly and out of order, in the format of the ending.
func cmdSplit(ts *testscript.TestScript, neg bool, args []string) {
	tb := readTable(ts, ts.MkAbs(args[0]))
	dir := ts.MkAbs(args[1])
	ts.Check(os.MkdirAll(dir, 0o777))
	count, ext, _ := strings.Cut(args[2], ".")
	n, err := strconv.Atoi(count)
	ts.Check(err)
	order := rand.New(rand.NewPCG(9, 9)).Perm(tb.rows())
	mixed := table{names: tb.names}
	for _, c := range tb.cols {
		m := make([]float64, len(c))
		for i, k := range order {
			m[i] = c[k]
		}
		mixed.cols = append(mixed.cols, m)
	}
	lo := 0
	for i := range n {
		hi := tb.rows() * (i + 1) * (i + 1) / (n * n)
		ts.Check(mixed.slice(lo, hi).write(filepath.Join(dir, fmt.Sprintf("part-%d.%s", (i*2+1)%n, ext)), 999))
		lo = hi
	}
}

func readTable(ts *testscript.TestScript, path string) table {
	b, err := os.ReadFile(path)
	ts.Check(err)
	var tb table
	for i, line := range strings.Split(strings.TrimSpace(string(b)), "\n") {
		cells := strings.Split(line, ",")
		if i == 0 {
			tb.names, tb.cols = cells, make([][]float64, len(cells))
			continue
		}
		for k, c := range cells {
			v, err := strconv.ParseFloat(c, 64)
			ts.Check(err)
			tb.cols[k] = append(tb.cols[k], v)
		}
	}
	return tb
}

// cmdCut: cut FROM TO N copies the first N bytes.
func cmdCut(ts *testscript.TestScript, neg bool, args []string) {
	b, err := os.ReadFile(ts.MkAbs(args[0]))
	ts.Check(err)
	n, err := strconv.Atoi(args[2])
	ts.Check(err)
	ts.Check(os.WriteFile(ts.MkAbs(args[1]), b[:min(n, len(b))], 0o666))
}

// listing names everything below a folder, hidden files too, with sizes and
// times of change.
func listing(dir string) (string, error) {
	var b strings.Builder
	err := filepath.WalkDir(dir, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		rel, _ := filepath.Rel(dir, p)
		if rel == ".tmp" { // testscript's own
			return fs.SkipDir
		}
		info, err := d.Info()
		if err != nil {
			return err
		}
		if d.IsDir() {
			fmt.Fprintf(&b, "%s/\n", rel)
		} else {
			fmt.Fprintf(&b, "%s %d %d\n", rel, info.Size(), info.ModTime().UnixNano())
		}
		return nil
	})
	return b.String(), err
}

// cmdRefuses: refuses STATUS drumlin ARG... runs a command that must end with
// the status, say why in one line on stderr, say nothing on stdout, and leave
// every file as it was.
func cmdRefuses(ts *testscript.TestScript, neg bool, args []string) {
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	before, err := listing(ts.Getenv("WORK"))
	ts.Check(err)
	err = ts.Exec(args[1], args[2:]...)
	stdout, stderr := ts.ReadFile("stdout"), ts.ReadFile("stderr")
	if got := statusOf(err); got != want {
		ts.Fatalf("status %d (%v), want %d: %s", got, err, want, stderr)
	}
	if fault := oneLine(stderr); fault != "" {
		ts.Fatalf("%s:\n%s", fault, stderr)
	}
	if stdout != "" {
		ts.Fatalf("stdout holds %q", stdout)
	}
	after, err := listing(ts.Getenv("WORK"))
	ts.Check(err)
	if before != after {
		ts.Fatalf("files before:\n%safter:\n%s", before, after)
	}
}

// oneLine says what keeps a complaint from being one plain line.
func oneLine(stderr string) string {
	switch {
	case strings.Count(stderr, "\n") != 1 || !strings.HasSuffix(stderr, "\n"):
		return "stderr is not one line"
	case !strings.HasPrefix(stderr, "drumlin: ") && !strings.HasPrefix(stderr, "{"):
		return "stderr does not name the program"
	case strings.Contains(stderr, "goroutine ") || strings.Contains(stderr, "panic") || strings.Contains(stderr, ".go:"):
		return "stderr holds a stack trace"
	case strings.Contains(stderr, "%!"):
		return "stderr is badly formatted"
	case len(stderr) > 900:
		return fmt.Sprintf("stderr is %d bytes long", len(stderr))
	case strings.HasPrefix(stderr, "drumlin: ") && len(stderr) < 25:
		return "stderr says too little"
	}
	return ""
}

func statusOf(err error) int {
	var e *exec.ExitError
	switch {
	case err == nil:
		return 0
	case errors.As(err, &e):
		return e.ExitCode()
	}
	return -1
}

// cmdLocked: locked OUT refuses... runs a command while another process, this
// one, writes the same bundle.
func cmdLocked(ts *testscript.TestScript, neg bool, args []string) {
	b, err := bundle.Create(context.Background(), ts.MkAbs(args[0]), bundle.Options{})
	ts.Check(err)
	defer b.Abort()
	cmdRefuses(ts, false, args[2:])
}

// cmdInterrupted: interrupted STAGE drumlin ARG... starts the program with
// --json, interrupts it when it reports the stage, and wants status 130, every
// file as it was and JSON lines to the end.
func cmdInterrupted(ts *testscript.TestScript, neg bool, args []string) {
	stage := args[0]
	work := ts.Getenv("WORK")
	before, err := listing(work)
	ts.Check(err)
	cmd := exec.Command(args[1], append(args[2:], "--json")...)
	cmd.Dir = work
	cmd.Env = append(os.Environ(), "HOME=/no-home")
	pipe, err := cmd.StderrPipe()
	ts.Check(err)
	var stdout bytes.Buffer
	cmd.Stdout = &stdout
	ts.Check(cmd.Start())
	guard := time.AfterFunc(2*time.Minute, func() { cmd.Process.Kill() })
	defer guard.Stop()
	var lines []string
	sent := time.Time{}
	for s := bufio.NewScanner(pipe); s.Scan(); {
		lines = append(lines, s.Text())
		var m struct{ Type, Stage string }
		if json.Unmarshal(s.Bytes(), &m) == nil && m.Type == "stage" && m.Stage == stage && sent.IsZero() {
			sent = time.Now()
			ts.Check(cmd.Process.Signal(syscall.SIGINT))
		}
	}
	err = cmd.Wait()
	took := time.Since(sent)
	text := strings.Join(lines, "\n")
	if sent.IsZero() {
		ts.Fatalf("stage %q was never reported:\n%s", stage, text)
	}
	if got := statusOf(err); got != 130 {
		ts.Fatalf("status %d after an interrupt in %q, want 130:\n%s\n%s", got, stage, text, stdout.String())
	}
	if took > time.Minute {
		ts.Fatalf("it took %v to stop in %q", took, stage)
	}
	ts.Logf("stopped %v after the interrupt in %q", took.Round(time.Millisecond), stage)
	if fault := allJSON(text); fault != "" {
		ts.Fatalf("%s:\n%s", fault, text)
	}
	if last := lines[len(lines)-1]; !strings.Contains(last, `"exit_status":130`) || !strings.Contains(last, "interrupted") {
		ts.Fatalf("the last line is %s", last)
	}
	after, err := listing(work)
	ts.Check(err)
	if before != after {
		ts.Fatalf("files before:\n%safter:\n%s", before, after)
	}
}

func allJSON(text string) (fault string) {
	for line := range strings.SplitSeq(strings.TrimSpace(text), "\n") {
		var m map[string]any
		if err := json.Unmarshal([]byte(line), &m); err != nil {
			return fmt.Sprintf("%q is no JSON object: %v", line, err)
		}
		if s, ok := m["type"].(string); !ok || s == "" {
			return fmt.Sprintf("%q has no type", line)
		}
	}
	return ""
}

// cmdJSONLines: jsonlines stdout|stderr [TYPE] wants every line to be a JSON
// object with a type, and the last of that type.
func cmdJSONLines(ts *testscript.TestScript, neg bool, args []string) {
	text := strings.TrimSpace(ts.ReadFile(args[0]))
	if fault := allJSON(text); fault != "" {
		ts.Fatalf("%s: %s", args[0], fault)
	}
	if len(args) > 1 {
		var m struct{ Type string }
		ts.Check(json.Unmarshal([]byte(text[strings.LastIndexByte(text, '\n')+1:]), &m))
		if m.Type != args[1] {
			ts.Fatalf("%s ends with type %q, not %q", args[0], m.Type, args[1])
		}
	}
}

// cmdEmpty: empty stdout|stderr.
func cmdEmpty(ts *testscript.TestScript, neg bool, args []string) {
	if s := ts.ReadFile(args[0]); s != "" {
		ts.Fatalf("%s holds %q", args[0], s)
	}
}

// withoutRun takes the section "This run" out of a report: it repeats the
// record's inputs, workers and times.
func withoutRun(html []byte) []byte {
	before, rest, ok := bytes.Cut(html, []byte(`<h2 id="h-run">`))
	if !ok {
		return html
	}
	_, after, _ := bytes.Cut(rest, []byte("</section>"))
	return slices.Concat(before, after)
}

// sameBundles compares two bundles byte for byte, but for the record's inputs,
// workers and times and what repeats them.
func sameBundles(a, b string) error {
	var lists [2][]string
	for i, dir := range []string{a, b} {
		entries, err := os.ReadDir(dir)
		if err != nil {
			return err
		}
		for _, e := range entries {
			lists[i] = append(lists[i], e.Name())
		}
	}
	if !slices.Equal(lists[0], lists[1]) {
		return fmt.Errorf("%v and %v", lists[0], lists[1])
	}
	for _, name := range lists[0] {
		x, err := os.ReadFile(filepath.Join(a, name))
		if err != nil {
			return err
		}
		y, err := os.ReadFile(filepath.Join(b, name))
		if err != nil {
			return err
		}
		if name == bundle.RecordName {
			if x, err = steady(x); err != nil {
				return err
			}
			if y, err = steady(y); err != nil {
				return err
			}
		}
		if name == "report.html" {
			x, y = withoutRun(x), withoutRun(y)
		}
		if !bytes.Equal(x, y) {
			at := 0
			for at < min(len(x), len(y)) && x[at] == y[at] {
				at++
			}
			show := func(b []byte) string { return string(b[max(0, at-150):min(len(b), at+150)]) }
			if bytes.IndexByte(x[:min(len(x), 64)], 0) >= 0 {
				show = func([]byte) string { return "(binary)" }
			}
			return fmt.Errorf("%s differs at byte %d:\n%s\n--- and ---\n%s", name, at, show(x), show(y))
		}
	}
	return nil
}

// steady is a record without the blocks that may differ between equal runs; the
// order and spelling of all else stays.
func steady(b []byte) ([]byte, error) {
	d := json.NewDecoder(bytes.NewReader(b))
	d.UseNumber()
	if _, err := d.Token(); err != nil {
		return nil, err
	}
	var out bytes.Buffer
	for d.More() {
		key, err := d.Token()
		if err != nil {
			return nil, err
		}
		var v json.RawMessage
		if err := d.Decode(&v); err != nil {
			return nil, err
		}
		if key != "inputs" && key != "workers" && key != "times" {
			fmt.Fprintf(&out, "%v: %s\n", key, v)
		}
	}
	return out.Bytes(), nil
}

// cmdSame: [!] same BUNDLE BUNDLE...
func cmdSame(ts *testscript.TestScript, neg bool, args []string) {
	for _, other := range args[1:] {
		err := sameBundles(ts.MkAbs(args[0]), ts.MkAbs(other))
		if err != nil && !neg {
			ts.Fatalf("%s and %s: %v", args[0], other, err)
		}
		if err == nil && neg {
			ts.Fatalf("%s and %s are the same", args[0], other)
		}
	}
}

func readRecord(ts *testscript.TestScript, dir string) map[string]any {
	b, err := os.ReadFile(filepath.Join(ts.MkAbs(dir), bundle.RecordName))
	ts.Check(err)
	d := json.NewDecoder(bytes.NewReader(b))
	d.UseNumber()
	var m map[string]any
	ts.Check(d.Decode(&m))
	return m
}

// cmdRecord: record BUNDLE path.to.value WANT compares what a member of the
// record prints as; "~" before WANT asks for a part of it.
func cmdRecord(ts *testscript.TestScript, neg bool, args []string) {
	var v any = readRecord(ts, args[0])
	for key := range strings.SplitSeq(args[1], ".") {
		switch x := v.(type) {
		case map[string]any:
			v = x[key]
		case []any:
			i, err := strconv.Atoi(key)
			if err != nil || i >= len(x) {
				ts.Fatalf("no %s in %v", key, x)
			}
			v = x[i]
		}
	}
	got := strings.Trim(fmt.Sprint(v), "[]")
	ok := got == args[2]
	if part, find := strings.CutPrefix(args[2], "~"); find {
		ok = strings.Contains(got, part)
	}
	if ok == neg {
		ts.Fatalf("%s is %q, want %q", args[1], got, args[2])
	}
}

// cmdSetAside: setaside BUNDLE REASON ROWS.
func cmdSetAside(ts *testscript.TestScript, neg bool, args []string) {
	rows := readRecord(ts, args[0])["rows"].(map[string]any)
	got := "0"
	for _, e := range rows["set_aside"].([]any) {
		if m := e.(map[string]any); m["reason"] == args[1] {
			got = fmt.Sprint(m["rows"])
		}
	}
	if got != args[2] {
		ts.Fatalf("%s rows set aside as %s, want %s: %v", got, args[1], args[2], rows)
	}
}

// cmdBalanced: balanced BUNDLE checks read = used + set aside + outside, and
// that the inputs' rows add up.
func cmdBalanced(ts *testscript.TestScript, neg bool, args []string) {
	rec := readRecord(ts, args[0])
	rows := rec["rows"].(map[string]any)
	number := func(v any) int64 {
		n, err := v.(json.Number).Int64()
		ts.Check(err)
		return n
	}
	sum := number(rows["used"]) + number(rows["outside_extent"])
	for _, e := range rows["set_aside"].([]any) {
		sum += number(e.(map[string]any)["rows"])
	}
	var inputs int64
	for _, e := range rec["inputs"].([]any) {
		inputs += number(e.(map[string]any)["rows"])
	}
	if read := number(rows["read"]); read != sum || read != inputs {
		ts.Fatalf("%d rows read, %d accounted for, %d in the inputs", read, sum, inputs)
	}
	if events := number(rec["tally"].(map[string]any)["events"]); events != number(rows["used"]) {
		ts.Fatalf("%d events in the tally, %d rows used", events, number(rows["used"]))
	}
}

// cmdJoin writes files one after the other: join [-rows] out file... With -rows
// the first line of every file but the first, its header, is left out.
func cmdJoin(ts *testscript.TestScript, neg bool, args []string) {
	rows := len(args) > 0 && args[0] == "-rows"
	if rows {
		args = args[1:]
	}
	if neg || len(args) < 2 {
		ts.Fatalf("usage: join [-rows] out file...")
	}
	var all []byte
	for i, name := range args[1:] {
		data := []byte(ts.ReadFile(name))
		if rows && i > 0 {
			_, data, _ = bytes.Cut(data, []byte("\n"))
		}
		all = append(all, data...)
	}
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), all, 0o666))
}
