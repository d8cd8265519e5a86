package spatial

// plane is metres without a place: what comes in goes out, as "degrees" and as
// metres alike. Only the two column names change.
type plane struct{}

var planeCRS = CRS{Name: "plane, metres without a place", Method: "plane"}

func (plane) CRS() CRS        { return planeCRS }
func (plane) EqualArea() bool { return true }

func (plane) Forward(p LonLats) XYs {
	checkColumns(len(p.Lon), len(p.Lat))
	return XYs{X: p.Lon, Y: p.Lat}
}

func (plane) Inverse(p XYs) LonLats {
	checkColumns(len(p.X), len(p.Y))
	return LonLats{Lon: p.X, Lat: p.Y}
}
