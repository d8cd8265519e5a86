package events

import (
	"fmt"
	"sort"
	"strings"
)

// Pair is the two columns that hold the coordinates.
type Pair struct {
	X, Y     string // column names as the input spells them
	Degrees  bool   // the names say longitude and latitude
	Swapped  bool   // asked for by name, and the names say latitude first
	Geometry string // point column the two belong to, "" if none
}

// pairNames are the names taken without being asked for, lower case, x first.
var pairNames = [...]struct {
	x, y    string
	degrees bool
}{
	{"lon", "lat", true}, {"longitude", "latitude", true}, {"long", "lat", true}, {"lng", "lat", true},
	{"x", "y", false}, {"easting", "northing", false},
}

// Resolve chooses the coordinate columns among the fields. x and y are the
// names asked for, both or neither; geometry, if not empty, names a point
// column that is stored as two numeric members, geometry.x and geometry.y.
// Without names the pairs lon/lat, longitude/latitude, long/lat, lng/lat, x/y
// and easting/northing are looked for, in any case of letters, and exactly one
// must be there.
//
// Errors are *Fault with an empty File, which the caller may fill in:
// ErrSetting when a name is missing, occurs twice or the choice is not clear,
// ErrUnsupported when a chosen column holds no numbers.
func Resolve(x, y, geometry string, fields []Field) (Pair, error) {
	if geometry != "" {
		if x != "" || y != "" {
			return Pair{}, setting("coordinates are asked for twice, as columns and as a geometry", "give one of the two")
		}
		return resolveGeometry(geometry, fields)
	}
	if x == "" && y == "" {
		return resolveUnnamed(fields)
	}
	if x == "" || y == "" {
		return Pair{}, setting("only one coordinate column is named", "name both, x and y")
	}
	if x == y {
		return Pair{}, setting(fmt.Sprintf("x and y are the same column %q", x), "name two columns")
	}
	for _, name := range []string{x, y} {
		if err := CheckNumeric(name, fields); err != nil {
			return Pair{}, err
		}
	}
	xk, yk := degreeRole(x), degreeRole(y)
	return Pair{X: x, Y: y, Degrees: xk == 'x' && yk == 'y', Swapped: xk == 'y' && yk == 'x'}, nil
}

// CheckNumeric returns nil when exactly one field has the name and it can be
// read as numbers, else a *Fault as Resolve does.
func CheckNumeric(name string, fields []Field) error {
	field, err := FindField(name, fields)
	if err == nil && !field.Numeric {
		err = &Fault{Kind: ErrUnsupported, What: fmt.Sprintf("column %q is %s, not numbers", name, field.Type),
			Remedy: "name a column of numbers: " + numericList(fields)}
	}
	return err
}

// CheckReadable returns nil when exactly one field has the name and it can be
// read at all, else a *Fault.
func CheckReadable(name string, fields []Field) error {
	field, err := FindField(name, fields)
	if err == nil && !field.Readable() {
		err = &Fault{Kind: ErrUnsupported, What: fmt.Sprintf("column %q is %s, which is not read", name, field.Type),
			Remedy: "name a column of numbers, text or times"}
	}
	return err
}

// FindField returns the one field with the name, or a *Fault of kind
// ErrSetting when there is none or more than one.
func FindField(name string, fields []Field) (Field, error) {
	found := 0
	var field Field
	for _, f := range fields {
		if f.Name == name {
			found++
			field = f
		}
	}
	switch {
	case found == 0:
		return field, setting(fmt.Sprintf("no column %q", name), near(name, fields))
	case found > 1:
		return field, setting(fmt.Sprintf("%d columns are called %q", found, name), "rename all but one of them")
	}
	return field, nil
}

// ResolveIn is Resolve for a source that may declare geometry columns: without
// names its primary geometry is taken, if it holds points, before columns with
// telling names.
func ResolveIn(x, y, geometry string, info Info, fields []Field) (Pair, error) {
	var refusal error
	for _, g := range info.Geometries {
		switch wanted := g.Name == geometry || geometry == "" && g.Primary; {
		case x != "" || y != "" || !wanted:
		case g.Refusal == "":
			return Resolve("", "", g.Name, fields)
		default:
			refusal = &Fault{Kind: ErrUnsupported, What: fmt.Sprintf("geometry column %q %s", g.Name, g.Refusal),
				Remedy: "name two columns of numbers with --x and --y, or a column of points with --geometry"}
		}
	}
	if refusal != nil && geometry != "" {
		return Pair{}, refusal
	}
	pair, err := Resolve(x, y, geometry, fields)
	if err != nil && refusal != nil {
		return Pair{}, refusal
	}
	return pair, err
}

func resolveGeometry(geometry string, fields []Field) (Pair, error) {
	gx, gy := geometry+".x", geometry+".y"
	for _, f := range fields {
		if f.Name == geometry {
			return Pair{}, &Fault{Kind: ErrUnsupported, What: fmt.Sprintf("geometry column %q is %s", geometry, f.Type),
				Remedy: "name two columns of numbers with x and y"}
		}
	}
	if e1, e2 := CheckNumeric(gx, fields), CheckNumeric(gy, fields); e1 != nil || e2 != nil {
		return Pair{}, setting(fmt.Sprintf("no point column %q", geometry), near(geometry, fields))
	}
	return Pair{X: gx, Y: gy, Geometry: geometry}, nil
}

func resolveUnnamed(fields []Field) (Pair, error) {
	byName := map[string][]Field{}
	for _, f := range fields {
		k := strings.ToLower(f.Name)
		byName[k] = append(byName[k], f)
	}
	var good []Pair
	var text, twice string
	for _, p := range pairNames {
		fx, fy := byName[p.x], byName[p.y]
		switch {
		case len(fx) == 0 || len(fy) == 0:
		case len(fx) > 1:
			twice = fx[0].Name
		case len(fy) > 1:
			twice = fy[0].Name
		case !fx[0].Numeric:
			text = fx[0].Name
		case !fy[0].Numeric:
			text = fy[0].Name
		default:
			good = append(good, Pair{X: fx[0].Name, Y: fy[0].Name, Degrees: p.degrees})
		}
	}
	switch {
	case twice != "":
		return Pair{}, setting(fmt.Sprintf("more than one column is called %q, letter case aside", twice), "name the x and y columns")
	case len(good) == 1:
		return good[0], nil
	case len(good) > 1:
		var s []string
		for _, p := range good {
			s = append(s, p.X+"/"+p.Y)
		}
		return Pair{}, setting("more than one pair of columns could be the coordinates: "+strings.Join(s, ", "), "name the x and y columns")
	case text != "":
		f := byName[strings.ToLower(text)][0]
		return Pair{}, &Fault{Kind: ErrUnsupported, What: fmt.Sprintf("column %q is %s, not numbers", f.Name, f.Type),
			Remedy: "name columns of numbers: " + numericList(fields)}
	}
	return Pair{}, setting("no column names say where the coordinates are", "name the x and y columns; numeric columns: "+numericList(fields))
}

func degreeRole(name string) byte {
	switch strings.ToLower(name) {
	case "lon", "longitude", "long", "lng":
		return 'x'
	case "lat", "latitude":
		return 'y'
	}
	return 0
}

func setting(what, remedy string) *Fault { return &Fault{Kind: ErrSetting, What: what, Remedy: remedy} }

// near suggests the columns whose names are closest to one that is missing.
func near(name string, fields []Field) string {
	type cand struct {
		name string
		d    int
	}
	var c []cand
	low := strings.ToLower(name)
	for _, f := range fields {
		fl := strings.ToLower(f.Name)
		d := 3
		if len(fl) < 200 && len(low) < 200 {
			d = distance(low, fl)
		}
		if low != "" && (strings.HasPrefix(fl, low) || strings.HasSuffix(fl, "."+low)) {
			d = min(d, 1)
		}
		if d <= 2 && d < max(len(low), 2) {
			c = append(c, cand{f.Name, d})
		}
	}
	if len(c) == 0 {
		return "numeric columns: " + numericList(fields)
	}
	sort.SliceStable(c, func(i, j int) bool { return c[i].d < c[j].d })
	var s []string
	for i := 0; i < len(c) && i < 5; i++ {
		s = append(s, fmt.Sprintf("%q", c[i].name))
	}
	return "close to it: " + strings.Join(s, ", ")
}

// distance is the least number of single-byte edits between two names.
func distance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := 1; i <= len(a); i++ {
		diag := row[0]
		row[0] = i
		for j := 1; j <= len(b); j++ {
			cost := diag
			if a[i-1] != b[j-1] {
				cost++
			}
			diag = row[j]
			row[j] = min(cost, row[j]+1, row[j-1]+1)
		}
	}
	return row[len(b)]
}

func numericList(fields []Field) string {
	var s []string
	n := 0
	for _, f := range fields {
		if !f.Numeric {
			continue
		}
		if n++; n <= 20 {
			s = append(s, f.Name)
		}
	}
	switch {
	case n == 0:
		return "none"
	case n > 20:
		return strings.Join(s, ", ") + fmt.Sprintf(" and %d more", n-20)
	}
	return strings.Join(s, ", ")
}
