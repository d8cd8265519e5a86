package main_test

import (
	"bytes"
	"encoding/json"
	"errors"
	"go/ast"
	"go/parser"
	"go/token"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// arrows is the order of the packages. "a, b < c" lets c import a and b and all
// that they may import; a line may hold a chain. "name = a, b" gives several
// one name. A name stands for a package and those below it that have no name of
// their own. std is open to all.
const arrows = `
gonum          = gonum.org/v1/gonum
gonum/optimize = gonum.org/v1/gonum/optimize
orb            = github.com/paulmach/orb
simplefeatures = github.com/peterstace/simplefeatures
arrow          = github.com/apache/arrow/go/v17
flatbuffers    = github.com/google/flatbuffers
packing        = github.com/klauspost/compress, github.com/pierrec/lz4/v4
cobra          = github.com/spf13/cobra
viper          = github.com/spf13/viper, github.com/go-viper/mapstructure/v2, github.com/spf13/pflag
terminal       = golang.org/x/term
drawing        = golang.org/x/image
testscript     = github.com/rogpeppe/go-internal

arrow readers  = io/parquetfile, io/arrowfile
plain readers  = io/csvfile
writers        = io/geojson, io/geotiff
table writers  = io/flatgeobuf, io/geoparquet
inner          = cmd/drumlin/internal

std, gonum < mv/internal < mv < mv/mvtest
mv, gonum/optimize < bandwidth
mv, orb, simplefeatures < spatial
std < io/events, io/record, io/internal < plain readers, arrow readers
arrow, packing < arrow readers
spatial, io/events, io/record, io/internal, packing < writers < io/report, io/bundle
spatial < io/layers < table writers
arrow, flatbuffers < table writers
drawing < io/report

mv, bandwidth, spatial, io/events, io/record, plain readers, arrow readers, writers, table writers, io/report, io/bundle < everything
viper < inner/config
terminal < inner/progress
everything, inner/config, inner/progress < inner/pipeline < inner/batch
everything < inner/demo
everything, cobra, viper, terminal, inner/batch, inner/pipeline, inner/demo < inner/cli < cmd/drumlin
testscript < tests
`

// nevers are what no file may do, or none but those of the packages after
// "but"; "tests too" includes test files. import and use speak of import paths
// and of what is written package.Name in a file.
const nevers = `
import math/rand                    tests too
import net
import net/http
import os/exec
import viper                        but inner/config
import arrow                        but arrow readers, io/geoparquet
import flatbuffers                  but io/flatgeobuf
import cobra                        but inner/cli
import mv/mvtest
import testscript
import simplefeatures in mv, bandwidth
import spatial in bandwidth, mv     tests too
import bandwidth in spatial, mv     tests too
import io in mv, bandwidth, spatial tests too
import os in mv, bandwidth, spatial
import log in mv, bandwidth, spatial
import log/slog in mv, bandwidth, spatial
import syscall in mv, bandwidth, spatial
use time.Now in mv, bandwidth, spatial
use time.Since in mv, bandwidth, spatial
use os.Getenv in mv, bandwidth, spatial, io
use os.Exit                         but cmd/drumlin
`

// topLevel is what may stand at the top of the repository, dotfiles aside.
var topLevel = []string{"cmd", "mv", "spatial", "bandwidth", "io", "testdata", "go.mod", "go.sum", "README.md", "DEVELOPERS.md", "LICENSE"}

const module = "drumlin"

// rooms is the parsed order.
type rooms struct {
	groups map[string][]string        // name: members, names or paths
	order  map[string]map[string]bool // name: direct permissions
	owner  map[string]string          // path within the module or of another: the name that stands for it
}

func parseArrows(t *testing.T, text string) *rooms {
	r := &rooms{groups: map[string][]string{}, order: map[string]map[string]bool{}, owner: map[string]string{}}
	for line := range strings.Lines(text) {
		line = strings.TrimSpace(line)
		if line == "" {
			continue
		}
		if name, members, ok := strings.Cut(line, "="); ok {
			r.groups[strings.TrimSpace(name)] = r.names(members)
			continue
		}
		levels := strings.Split(line, "<")
		if len(levels) < 2 {
			t.Fatalf("arrows: cannot read %q", line)
		}
		var left []string
		for i, level := range levels {
			here := r.names(level)
			for _, to := range here {
				if r.order[to] == nil {
					r.order[to] = map[string]bool{}
				}
				if i > 0 {
					for _, from := range left {
						r.order[to][from] = true
					}
				}
			}
			left = append(left, here...)
		}
	}
	for name := range r.order {
		members, ok := r.groups[name]
		if !ok {
			members = []string{name}
		}
		for _, m := range members {
			if r.owner[m] != "" {
				t.Fatalf("arrows: %s belongs to %s and to %s", m, r.owner[m], name)
			}
			r.owner[m] = name
		}
	}
	return r
}

// names splits a list and spells "inner/x" out.
func (r *rooms) names(list string) []string {
	var out []string
	for _, n := range strings.Split(list, ",") {
		n = strings.TrimSpace(n)
		if rest, ok := strings.CutPrefix(n, "inner/"); ok && len(r.groups["inner"]) == 1 {
			n = r.groups["inner"][0] + "/" + rest
		}
		out = append(out, n)
	}
	return out
}

// room returns the name that stands for an import path: that of its longest
// known beginning, "std" for the standard library, "" for none.
func (r *rooms) room(path string) string {
	path = strings.TrimPrefix(path, module+"/")
	for p := path; ; {
		if o := r.owner[p]; o != "" {
			return o
		}
		i := strings.LastIndexByte(p, '/')
		if i < 0 {
			break
		}
		p = p[:i]
	}
	if first, _, _ := strings.Cut(path, "/"); !strings.Contains(first, ".") && !slices.Contains(topLevel, first) {
		return "std"
	}
	return ""
}

// isStd tells the standard library's io/fs from the module's io/events.
func isStd(path string) bool {
	first, _, _ := strings.Cut(path, "/")
	return !strings.Contains(first, ".") && first != module
}

// may reports whether a room may import another, directly or by the chain.
func (r *rooms) may(from, to string) bool {
	seen := map[string]bool{}
	var walk func(string) bool
	walk = func(n string) bool {
		if seen[n] {
			return false
		}
		seen[n] = true
		for d := range r.order[n] {
			if d == to || walk(d) {
				return true
			}
		}
		return false
	}
	return from == to || walk(from)
}

// covers reports whether a name (a room, a group or a path) holds a package. The
// name io is the module's, never the standard library's.
func (r *rooms) covers(name, path string) bool {
	if isStd(path) {
		return path == name && name != "io"
	}
	path = strings.TrimPrefix(path, module+"/")
	members := r.groups[name]
	if members == nil {
		members = []string{name}
	}
	return slices.ContainsFunc(members, func(m string) bool { return path == m || strings.HasPrefix(path, m+"/") })
}

func firstElement(p string) string { f, _, _ := strings.Cut(p, "/"); return f }

type listed struct {
	ImportPath, Dir                    string
	GoFiles, TestGoFiles, XTestGoFiles []string
	Imports, TestImports, XTestImports []string
	CgoFiles, SFiles, CFiles           []string
}

func listPackages(t *testing.T) []listed {
	cmd := exec.Command("go", "list", "-e", "-json=ImportPath,Dir,GoFiles,TestGoFiles,XTestGoFiles,Imports,TestImports,XTestImports,CgoFiles,SFiles,CFiles", "./...")
	cmd.Dir = repository(t)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list: %v\n%s", err, stderr.String())
	}
	var all []listed
	for d := json.NewDecoder(bytes.NewReader(out)); ; {
		var p listed
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all
		} else if err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
}

// repository returns the folder of go.mod.
func repository(t *testing.T) string {
	t.Helper()
	dir, err := filepath.Abs(filepath.Join("..", ".."))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(filepath.Join(dir, "go.mod")); err != nil {
		t.Fatal(err)
	}
	return dir
}

// TestArrows holds every package to the order of imports.
func TestArrows(t *testing.T) {
	r := parseArrows(t, arrows)
	for _, p := range listPackages(t) {
		room := r.room(p.ImportPath)
		if room == "" || room == "std" {
			t.Errorf("%s has no place in the order; give it one in arrows", p.ImportPath)
			continue
		}
		if len(p.CgoFiles)+len(p.SFiles)+len(p.CFiles) > 0 {
			t.Errorf("%s holds cgo, C or assembly", p.ImportPath)
		}
		for _, path := range p.Imports {
			if isStd(path) {
				continue
			}
			if to := r.room(path); !r.may(room, to) {
				t.Errorf("%s (%s) may not import %s (%s)", p.ImportPath, room, path, to)
			}
		}
		// Tests may use what their package may, the package itself and the helpers.
		for _, path := range append(p.TestImports, p.XTestImports...) {
			to := r.room(path)
			if !isStd(path) && to != "mv/mvtest" && to != "simplefeatures" && !r.may(room, to) && !r.may("tests", to) {
				t.Errorf("tests of %s (%s) may not import %s (%s)", p.ImportPath, room, path, to)
			}
		}
	}
}

type never struct {
	text, kind, what string
	in, but          []string
	tests            bool
}

func parseNevers(t *testing.T, r *rooms) []never {
	var out []never
	for line := range strings.Lines(nevers) {
		line = strings.Join(strings.Fields(line), " ")
		if line == "" {
			continue
		}
		n := never{text: line}
		line, n.tests = strings.CutSuffix(line, " tests too")
		if rest, but, ok := strings.Cut(line, " but "); ok {
			line, n.but = rest, r.names(but)
		}
		if rest, in, ok := strings.Cut(line, " in "); ok {
			line, n.in = rest, r.names(in)
		}
		var ok bool
		if n.kind, n.what, ok = strings.Cut(line, " "); !ok || n.kind != "import" && n.kind != "use" {
			t.Fatalf("nevers: cannot read %q", n.text)
		}
		out = append(out, n)
	}
	return out
}

// holdsFor reports whether the rule speaks of a package: it is among those
// named ("mv" names what is below it too), and not excepted.
func (n never) holdsFor(r *rooms, path string) bool {
	hit := func(name string) bool { return r.covers(name, path) }
	if slices.ContainsFunc(n.but, hit) {
		// cmd/drumlin excepts the program alone, not the packages below it.
		return slices.Contains(n.but, "cmd/drumlin") && path != module+"/cmd/drumlin"
	}
	return len(n.in) == 0 || slices.ContainsFunc(n.in, hit)
}

// TestNevers reads every file for what it must not import or use.
func TestNevers(t *testing.T) {
	r := parseArrows(t, arrows)
	rules := parseNevers(t, r)
	fset := token.NewFileSet()
	for _, p := range listPackages(t) {
		for i, files := range [][]string{p.GoFiles, p.TestGoFiles, p.XTestGoFiles} {
			for _, name := range files {
				f, err := parser.ParseFile(fset, filepath.Join(p.Dir, name), nil, parser.SkipObjectResolution)
				if err != nil {
					t.Fatal(err)
				}
				for _, n := range rules {
					if i > 0 && !n.tests || !n.holdsFor(r, p.ImportPath) {
						continue
					}
					if at, bad := n.broken(r, f); bad {
						t.Errorf("%s/%s:%d breaks %q", strings.TrimPrefix(p.ImportPath, module+"/"), name, fset.Position(at).Line, n.text)
					}
				}
			}
		}
	}
}

// broken looks for the first place in a file that breaks the rule.
func (n never) broken(r *rooms, f *ast.File) (at token.Pos, bad bool) {
	if n.kind == "import" {
		for _, s := range f.Imports {
			path, err := strconv.Unquote(s.Path.Value)
			if err == nil && r.covers(n.what, path) {
				return s.Pos(), true
			}
		}
		return 0, false
	}
	pkg, name, _ := strings.Cut(n.what, ".")
	local := ""
	for _, s := range f.Imports {
		if s.Path.Value == strconv.Quote(pkg) {
			if local = pkg; s.Name != nil {
				local = s.Name.Name
			}
		}
	}
	if local == "" {
		return 0, false
	}
	ast.Inspect(f, func(node ast.Node) bool {
		if s, ok := node.(*ast.SelectorExpr); ok && !bad {
			if x, ok := s.X.(*ast.Ident); ok && x.Name == local && s.Sel.Name == name {
				at, bad = s.Pos(), true
			}
		}
		return !bad
	})
	return at, bad
}

// TestArrowsAreRead makes sure that the checks above can fail.
func TestArrowsAreRead(t *testing.T) {
	r := parseArrows(t, arrows)
	for _, c := range []struct {
		from, to string
		want     bool
	}{
		{"mv", "gonum.org/v1/gonum/mat", true},
		{"mv", "gonum.org/v1/gonum/optimize", false},
		{"bandwidth", "gonum.org/v1/gonum/optimize", true},
		{"bandwidth", "drumlin/spatial", false},
		{"spatial", "drumlin/bandwidth", false},
		{"mv", "drumlin/io/events", false},
		{"io/csvfile", "github.com/apache/arrow/go/v17/parquet", false},
		{"io/parquetfile", "github.com/apache/arrow/go/v17/parquet", true},
		{"io/csvfile", "drumlin/io/events", true},
		{"io/csvfile", "drumlin/spatial", false},
		{"io/geojson", "drumlin/io/csvfile", false},
		{"io/bundle", "drumlin/io/geotiff", true},
		{"io/geotiff", "drumlin/io/bundle", false},
		{"cmd/drumlin/internal/pipeline", "github.com/spf13/viper", true}, // by config; the nevers forbid it
		{"cmd/drumlin/internal/pipeline", "github.com/spf13/cobra", false},
		{"cmd/drumlin/internal/config", "drumlin/mv", false},
		{"cmd/drumlin/internal/cli", "drumlin/cmd/drumlin/internal/pipeline", true},
		{"cmd/drumlin/internal/pipeline", "drumlin/cmd/drumlin/internal/cli", false},
		{"cmd/drumlin", "drumlin/cmd/drumlin/internal/cli", true},
		{"mv/internal/fft", "drumlin/mv", false},
		{"mv", "github.com/unheard/of", false},
	} {
		if got := r.may(r.room(module+"/"+c.from), r.room(c.to)); got != c.want {
			t.Errorf("%s imports %s: %v, want %v", c.from, c.to, got, c.want)
		}
	}
	src := "package p\nimport (\n\"math/rand\"\n\"net/http\"\n\"drumlin/spatial\"\n\"drumlin/io/events\"\n\"io\"\n\"os\"\n\"time\"\n\"github.com/spf13/viper\"\n)\nvar _ = time.Now\nfunc f() { os.Exit(1) }\n"
	f, err := parser.ParseFile(token.NewFileSet(), "p.go", src, 0)
	if err != nil {
		t.Fatal(err)
	}
	broken := map[string]bool{}
	for _, n := range parseNevers(t, r) {
		if _, bad := n.broken(r, f); bad && n.holdsFor(r, "drumlin/bandwidth") {
			broken[n.kind+" "+n.what] = true
		}
	}
	for _, want := range []string{"import math/rand", "import net/http", "import spatial", "import io", "import os", "use time.Now", "use os.Exit", "import viper"} {
		if !broken[want] {
			t.Errorf("%q was not noticed", want)
		}
	}
	clean, err := parser.ParseFile(token.NewFileSet(), "p.go", "package p\nimport (\n\"io\"\n\"math/rand/v2\"\n\"drumlin/mv\"\n\"time\"\n)\nvar _ = time.Second\n", 0)
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range parseNevers(t, r) {
		if _, bad := n.broken(r, clean); bad && n.holdsFor(r, "drumlin/bandwidth") {
			t.Errorf("%q is broken by a file that is in order", n.text)
		}
	}
}

// tracked lists the repository's files, those not yet added among them.
func tracked(t *testing.T) []string {
	cmd := exec.Command("git", "ls-files", "-z", "--cached", "--others", "--exclude-standard")
	cmd.Dir = repository(t)
	out, err := cmd.Output()
	if err != nil {
		demand(t, "the list of files comes from git, which is not at hand: %v", err)
	}
	return strings.Split(strings.TrimRight(string(out), "\x00"), "\x00")
}

// demand skips with a message; where everything must run (DRUMLIN_CI=1) it fails.
func demand(t *testing.T, format string, a ...any) {
	t.Helper()
	if os.Getenv("DRUMLIN_CI") == "1" {
		t.Fatalf(format, a...)
	}
	t.Skipf(format, a...)
}

func TestTopLevel(t *testing.T) {
	seen := map[string]bool{}
	for _, f := range tracked(t) {
		first := firstElement(f)
		if !seen[first] && !strings.HasPrefix(first, ".") && !slices.Contains(topLevel, first) {
			t.Errorf("%s does not belong at the top of the repository", first)
		}
		seen[first] = true
	}
}

// foreign are words that no file may hold, in lower case, taken apart so that
// this file does not: of where the project was made rather than of the project.
var foreign = []string{"lec" + "ture", "/wor" + "k/", "/ro" + "ot/", "/home" + "/", "/tm" + "p/s/"}

func TestForeignWords(t *testing.T) {
	dir := repository(t)
	for _, name := range tracked(t) {
		b, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			if errors.Is(err, os.ErrNotExist) {
				continue // removed, not yet committed
			}
			t.Fatal(err)
		}
		if bytes.IndexByte(b, 0) >= 0 {
			continue // not text
		}
		low := bytes.ToLower(b)
		for _, w := range foreign {
			if i := bytes.Index(low, []byte(w)); i >= 0 {
				t.Errorf("%s:%d holds %q", name, 1+bytes.Count(b[:i], []byte("\n")), w)
			}
		}
	}
}
