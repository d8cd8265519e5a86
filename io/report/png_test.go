package report_test

import (
	"bytes"
	"fmt"
	"image"
	"image/png"
	"strings"
	"testing"

	"drumlin/io/report"
)

func picture(t testing.TB, p report.Page, opt report.PNGOptions) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := report.WritePNG(&b, p, opt); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// The picture has the size asked for, many colours, and the same bytes again.
func TestPicture(t *testing.T) {
	p := page(t)
	light := picture(t, p, report.PNGOptions{Width: 1000})
	if !bytes.Equal(light, picture(t, p, report.PNGOptions{Width: 1000})) {
		t.Error("two pictures of one page differ")
	}
	dark := picture(t, p, report.PNGOptions{Width: 1000, Dark: true})
	for _, raw := range [][]byte{light, dark} {
		m, err := png.Decode(bytes.NewReader(raw))
		if err != nil {
			t.Fatal(err)
		}
		if m.Bounds().Dx() != 1000 || m.Bounds().Dy() < 500 {
			t.Errorf("picture of %v", m.Bounds())
		}
	}
	a, _, err := image.Decode(bytes.NewReader(light))
	if err != nil {
		t.Fatal(err)
	}
	if r, g, b, _ := a.At(2, 2).RGBA(); r+g+b != 3*0xffff {
		t.Error("the light picture's ground is not white")
	}
	if bytes.Equal(light, dark) {
		t.Error("light and dark are the same")
	}
	for _, width := range []int{1, 799, 6401, -5} {
		if err := report.WritePNG(&bytes.Buffer{}, p, report.PNGOptions{Width: width}); err == nil {
			t.Errorf("a width of %d pixels was taken", width)
		}
	}
}

// A failing writer's error comes back.
func TestWriterFails(t *testing.T) {
	p := page(t)
	if err := report.WriteHTML(brokenWriter{}, p); err == nil {
		t.Error("WriteHTML hid the writer's error")
	}
	if err := report.WritePNG(brokenWriter{}, p, report.PNGOptions{Width: 800}); err == nil {
		t.Error("WritePNG hid the writer's error")
	}
}

type brokenWriter struct{}

func (brokenWriter) Write([]byte) (int, error) { return 0, fmt.Errorf("no room") }

func ExampleWriteHTML() {
	page := report.Page{Record: testRecord(proj.CRS()), Release: coarse(), Projection: proj, Title: "Calls for the fire service, 2025"}
	var b bytes.Buffer
	if err := report.WriteHTML(&b, page); err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(strings.Contains(b.String(), "Calls for the fire service, 2025"))
	// Output: true
}
