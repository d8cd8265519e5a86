package spatial

// NewProjectionOn lets tests use an ellipsoid that has no name here.
var NewProjectionOn = newProjectionOn

// RegisteredGrids lists the codes with parameters of their own.
func RegisteredGrids() []int {
	var codes []int
	for code := range grids {
		codes = append(codes, code)
	}
	for z := range japan {
		codes = append(codes, 6669+z)
	}
	return codes
}

// AuthalicPair exposes the authalic latitude for its closed form.
func AuthalicPair(e *Ellipsoid, s, c float64) (sb, cb float64) { return e.authalic(s, c) }

// BackFromAuthalic and BackFromConformal expose the two series.
func BackFromAuthalic(e *Ellipsoid, s, c float64) float64  { return e.fromAuthalic(s, c) }
func BackFromConformal(e *Ellipsoid, s, c float64) float64 { return e.fromConformal(s, c) }

// Krueger exposes the coefficients of the transverse Mercator, there.
func Krueger(e *Ellipsoid) [6]float64 { return e.alpha }
