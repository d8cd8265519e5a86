package geojson_test

import (
	"fmt"
	"os"
	"strings"

	"drumlin/io/geojson"
	"drumlin/spatial"
)

func ExampleReadPolygons() {
	areas, err := geojson.ReadPolygons(strings.NewReader(
		`{"type":"Feature","properties":{"name":"Harbour"},"geometry":{"type":"Polygon","coordinates":[[[0,0],[0,1],[1,1],[0,0]]]}}`))
	fmt.Println(areas[0].Name("name"), areas[0].Shape, err)
	// Output: Harbour [[[[0 0] [1 1] [0 1] [0 0]]]] <nil>
}

func ExampleReader() {
	_, err := geojson.Reader{Plane: true}.Polygons(strings.NewReader(`{"type":"Polygon","coordinates":[[[0,0],[5000,0],[5000,5000],[0,5000]]]}`))
	fmt.Println(err)
	// Output: geojson: ring 1: the ring is open: its last position must repeat the first: geojson malformed
}

func ExampleWritePeaks() {
	var nothing spatial.Release // what spatial.Guard returns has peaks
	if err := geojson.WritePeaks(os.Stdout, &nothing, geojson.Meta{Unit: "events per km2 and year"}); err != nil {
		fmt.Println(err)
	}
	// Output:
	// {"type":"FeatureCollection",
	// "drumlin":{"what":"peaks","unit":"events per km2 and year","min_events":0},
	// "features":[]}
}
