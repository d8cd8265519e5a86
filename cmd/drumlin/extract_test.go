package main_test

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/klauspost/compress/zstd"
	"github.com/rogpeppe/go-internal/testscript"

	"drumlin/io/parquetfile"
)

// extract is a table of events with a kind, a severity and a time.
type extract struct {
	lon, lat, severity []float64
	kind               []string
	when               []time.Time
}

const extractRows = 900

// newExtract draws the events: in the order of their times, which span two
// years from 2024-01-01T00:30Z on.
func newExtract() extract {
	tb := cloud(extractRows, 77, 10, 50, 1, false, false)
	e := extract{lon: tb.cols[0], lat: tb.cols[1]}
	start := time.Date(2024, 1, 1, 0, 30, 0, 0, time.UTC)
	for i := range extractRows {
		e.severity = append(e.severity, float64(i%5))
		e.kind = append(e.kind, []string{"fire", "flood", "O'Hara road"}[i%3])
		e.when = append(e.when, start.Add(time.Duration(i)*19*time.Hour+time.Duration(i%7)*time.Minute))
	}
	return e
}

// take keeps the rows for which keep holds.
func (e extract) take(keep func(i int) bool) (out extract) {
	for i := range e.lon {
		if keep(i) {
			out.lon, out.lat = append(out.lon, e.lon[i]), append(out.lat, e.lat[i])
			out.severity, out.kind, out.when = append(out.severity, e.severity[i]), append(out.kind, e.kind[i]), append(out.when, e.when[i])
		}
	}
	return out
}

// write writes Parquet or CSV, as the name says; kind may be left out.
func (e extract) write(path string, groupRows int, withKind bool) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
		return err
	}
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	if strings.HasSuffix(path, ".parquet") {
		cols := []parquetfile.Column{
			{Name: "lon", Floats: e.lon}, {Name: "lat", Floats: e.lat}, {Name: "severity", Floats: e.severity},
			{Name: "when", Type: parquetfile.Timestamp, Ints: parquetfile.Microseconds(e.when)},
		}
		if withKind {
			cols = append(cols, parquetfile.Column{Name: "kind", Type: parquetfile.Text, Texts: e.kind})
		}
		return parquetfile.Write(f, cols, parquetfile.WriteOptions{RowGroupRows: groupRows})
	}
	w := bufio.NewWriter(f)
	fmt.Fprintln(w, "lon,lat,severity,when,kind")
	for i := range e.lon {
		fmt.Fprintf(w, "%v,%v,%v,%s,%s\n", e.lon[i], e.lat[i], e.severity[i], e.when[i].Format(time.RFC3339), e.kind[i])
	}
	return w.Flush()
}

// cmdExtract: extract FILE [-group ROWS] [-kind KIND] [-least SEVERITY]
// [-from DATE] [-until DATE] [-tree] writes the events; with -tree FILE is a
// folder that becomes kind=.../part.parquet.
func cmdExtract(ts *testscript.TestScript, _ bool, args []string) {
	fs := flag.NewFlagSet("extract", flag.ContinueOnError)
	group := fs.Int("group", 0, "")
	kind := fs.String("kind", "", "")
	least := fs.Float64("least", 0, "")
	from := fs.String("from", "0001-01-01", "")
	until := fs.String("until", "9999-01-01", "")
	tree := fs.Bool("tree", false, "")
	ts.Check(fs.Parse(args[1:]))
	e := newExtract()
	e = e.take(func(i int) bool {
		at := e.when[i].Format(time.RFC3339)
		return (*kind == "" || e.kind[i] == *kind) && e.severity[i] >= *least && at >= *from && at < *until
	})
	if !*tree {
		ts.Check(e.write(ts.MkAbs(args[0]), *group, true))
		return
	}
	for folder, name := range map[string]string{"kind=fire": "fire", "kind=flood": "flood", "kind=O%27Hara%20road": "O'Hara road"} {
		part := e.take(func(i int) bool { return e.kind[i] == name })
		ts.Check(part.write(filepath.Join(ts.MkAbs(args[0]), folder, "part.parquet"), *group, false))
	}
}

// cmdPack: pack FILE writes FILE.gz and FILE.zst.
func cmdPack(ts *testscript.TestScript, _ bool, args []string) {
	path := ts.MkAbs(args[0])
	b, err := os.ReadFile(path)
	ts.Check(err)
	var buf bytes.Buffer
	w := gzip.NewWriter(&buf)
	_, err = w.Write(b)
	ts.Check(err)
	ts.Check(w.Close())
	ts.Check(os.WriteFile(path+".gz", buf.Bytes(), 0o666))
	z, err := zstd.NewWriter(nil)
	ts.Check(err)
	ts.Check(os.WriteFile(path+".zst", z.EncodeAll(b, nil), 0o666))
}
