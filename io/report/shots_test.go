package report_test

import (
	"encoding/base64"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestShots writes screenshots of the pages named in DRUMLIN_PAGES (separated
// by the system's list separator) into DRUMLIN_SHOTS, for a person to look at:
// phone, laptop, dark, and as printed on A4.
func TestShots(t *testing.T) {
	dir := os.Getenv("DRUMLIN_SHOTS")
	if dir == "" {
		t.Skip("DRUMLIN_SHOTS names no folder")
	}
	b := startBrowser(t)
	for _, path := range filepath.SplitList(os.Getenv("DRUMLIN_PAGES")) {
		name := filepath.Base(filepath.Dir(path))
		for _, s := range []struct {
			kind, media string
			width       int
			scale       float64
			dark        bool
		}{{"phone", "", 390, 2, false}, {"laptop", "", 1366, 1, false}, {"dark", "", 1366, 1, true}, {"print", "print", 726, 1.5, false}} {
			b.call("Emulation.setDeviceMetricsOverride", map[string]any{"width": s.width, "height": 1054, "deviceScaleFactor": s.scale, "mobile": s.kind == "phone"}, nil)
			scheme := "light"
			if s.dark {
				scheme = "dark"
			}
			b.call("Emulation.setEmulatedMedia", map[string]any{"media": s.media, "features": []map[string]string{{"name": "prefers-color-scheme", "value": scheme}}}, nil)
			b.open("file://" + path)
			quiet(t, b, "file://"+path)
			var height float64
			b.eval(`document.documentElement.scrollHeight`, &height)
			t.Logf("%s, %s: %d by %.0f", name, s.kind, s.width, height)
			var shot struct{ Data string }
			b.call("Page.captureScreenshot", map[string]any{"captureBeyondViewport": true, "clip": map[string]any{"x": 0, "y": 0, "width": s.width, "height": height, "scale": 1}}, &shot)
			raw, err := base64.StdEncoding.DecodeString(shot.Data)
			if err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(filepath.Join(dir, strings.Join([]string{name, s.kind}, "-")+".png"), raw, 0o666); err != nil {
				t.Fatal(err)
			}
		}
		b.call("Emulation.setEmulatedMedia", map[string]any{"media": "", "features": []map[string]string{}}, nil)
		b.call("Emulation.clearDeviceMetricsOverride", nil, nil)
		onePage(t, b)
	}
}
