package report_test

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"drumlin/spatial"
)

// save puts a page into a folder and returns its address.
func save(t *testing.T, b []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "report.html")
	if err := os.WriteFile(path, b, 0o666); err != nil {
		t.Fatal(err)
	}
	return "file://" + filepath.ToSlash(path)
}

// quiet fails when the page said something or asked for anything but itself.
func quiet(t *testing.T, b *browser, url string) {
	t.Helper()
	for _, kind := range []string{"Log.entryAdded", "Runtime.consoleAPICalled", "Runtime.exceptionThrown"} {
		for _, e := range b.seen(kind) {
			t.Errorf("%s: %s", kind, e)
		}
	}
	for _, e := range b.seen("Network.requestWillBeSent") {
		if !strings.Contains(e, `"url":"`+url+`"`) && !strings.Contains(e, `"url":"data:`) {
			t.Errorf("request: %s", e)
		}
	}
}

// The page in a browser: silent, alone, each control works, the keyboard alone
// reaches everything.
func TestBrowser(t *testing.T) {
	if testing.Short() {
		t.Skip("starts a browser")
	}
	b := startBrowser(t)
	url := save(t, write(t, page(t)))
	b.call("Emulation.setDeviceMetricsOverride", map[string]any{"width": 1366, "height": 900, "deviceScaleFactor": 1, "mobile": false}, nil)
	b.open(url)
	quiet(t, b, url)
	keyboard(t, b, true)
	pointer(t, b)
	looks(t, b)
	policyHolds(t, b)
	b.open(url)
	quiet(t, b, url)
	onePage(t, b)
	b.eval(`document.getElementById("c-all").click()`, nil)
	if n := len(printed(t, b)); n < 2 {
		t.Errorf("with the evidence it prints on %d pages", n)
	}
	phone(t, b)
	b.call("Emulation.setScriptExecutionDisabled", map[string]any{"value": true}, nil)
	b.open(url)
	quiet(t, b, url)
	keyboard(t, b, false)
}

// keyboard walks through the page with the Tab key, switches each layer with
// the space bar and moves the cross with the arrows.
func keyboard(t *testing.T, b *browser, script bool) {
	t.Helper()
	var want []string
	b.eval(`Array.from(document.querySelectorAll("a[href],input:not([type=radio]),summary,[tabindex='0'],input[type=radio]:checked")).filter(e => e.checkVisibility() || e.closest("svg") || e.className == "skip").map((e, i) => (e.dataset.walk = i, e.outerHTML.slice(0, 90)))`, &want)
	reached := map[int]bool{}
	for range len(want) + 5 {
		b.press("Tab")
		var at struct {
			Walk           int
			ID, Text, Kind string
		}
		b.eval(`(e => ({Walk: e.dataset && e.dataset.walk ? +e.dataset.walk : -1, ID: e.id, Kind: e.type || ""}))(document.activeElement)`, &at)
		if at.Walk < 0 {
			continue
		}
		reached[at.Walk] = true
		if layer, ok := strings.CutPrefix(at.ID, "l-"); ok && at.Kind == "checkbox" {
			hidden := fmt.Sprintf(`Array.from(document.querySelectorAll(".l-%s")).map(e => getComputedStyle(e).display == "none")`, layer)
			for _, off := range []bool{true, false} {
				b.press(" ")
				var got []bool
				b.eval(hidden, &got)
				if len(got) == 0 {
					t.Errorf("layer %s has nothing to switch", layer)
				}
				for _, g := range got {
					if g != off {
						t.Errorf("layer %s: hidden %t, want %t", layer, g, off)
					}
				}
			}
		}
		if at.ID == "stage" {
			before := reading(b)
			for range 12 {
				b.press("ArrowRight")
			}
			after := reading(b)
			var cross string
			b.eval(`getComputedStyle(document.getElementById("cross")).display`, &cross)
			if before == after || cross == "none" || !strings.Contains(after, "° S") {
				t.Errorf("the cross: %q, then %q, display %s", before, after, cross)
			}
		}
	}
	for i, w := range want {
		if !reached[i] {
			t.Errorf("the Tab key does not reach %s", w)
		}
	}
	if stage := strings.Contains(strings.Join(want, ""), `id="stage"`); stage != script {
		t.Errorf("the map takes the keyboard: %t, with script: %t", stage, script)
	}
}

// reading waits a frame and returns what is read out.
func reading(b *browser) (s string) {
	b.eval(`new Promise(f => requestAnimationFrame(() => requestAnimationFrame(() => f(document.getElementById("read").textContent))))`, &s)
	return s
}

// pointer reads the place of the first peak, which the release knows.
func pointer(t *testing.T, b *browser) {
	t.Helper()
	b.eval(`document.activeElement.blur(); document.getElementById("map").scrollIntoView()`, nil)
	var at struct{ X, Y float64 }
	b.eval(`(() => {
		const a = Array.from(document.querySelectorAll("#map a.mark")).pop(), d = a.previousElementSibling;
		const r = (d && d.matches(".dot") ? d : a.querySelector(".disc")).getBoundingClientRect();
		return {X: r.x + r.width / 2, Y: r.y + r.height / 2};
	})()`, &at)
	b.call("Input.dispatchMouseEvent", map[string]any{"type": "mouseMoved", "x": at.X, "y": at.Y}, nil)
	got := strings.ReplaceAll(reading(b), "\u00a0", " ")
	peak := coarse().Peaks()[0]
	place, _, _ := strings.Cut(got, ":")
	var lat, lon float64
	var ns, ew string
	if _, err := fmt.Sscanf(strings.ReplaceAll(place, "°", ""), "%f %1s, %f %1s", &lat, &ns, &lon, &ew); err != nil {
		t.Fatalf("%q: %v", got, err)
	}
	if ns == "S" {
		lat = -lat
	}
	if ew == "W" {
		lon = -lon
	}
	f, g := proj.Forward(spatial.LonLats{Lon: []float64{lon, peak.Position.Lon}, Lat: []float64{lat, peak.Position.Lat}}), 1600.0*3
	if dx, dy := f.X[0]-f.X[1], f.Y[0]-f.Y[1]; dx*dx+dy*dy > g*g {
		t.Errorf("at peak 1 the map reads %q, %.0f m and %.0f m off", got, dx, dy)
	}
	var band string
	for _, v := range coarse().Bands() {
		if holds(v.Plane, peak.At) {
			band = fmt.Sprintf("%.3g to %.3g", v.FromPerKM2, v.ToPerKM2)
		}
	}
	if !strings.Contains(got, band) || !strings.Contains(got, "inside the 50 % region") {
		t.Errorf("at peak 1 the map reads %q; the band is %s", got, band)
	}
}

// holds counts crossings of a line to the east.
func holds(m spatial.MultiPolygon, at spatial.XY) (in bool) {
	for _, p := range m {
		for _, r := range p {
			for i, a := range r {
				b := r[(i+1)%len(r)]
				if (a.Y > at.Y) != (b.Y > at.Y) && at.X < a.X+(b.X-a.X)*(at.Y-a.Y)/(b.Y-a.Y) {
					in = !in
				}
			}
		}
	}
	return in
}

// looks switches between light and dark.
func looks(t *testing.T, b *browser) {
	t.Helper()
	colours := map[string]string{}
	for _, id := range []string{"c-dark", "c-light", "c-system"} {
		var c string
		b.eval(fmt.Sprintf(`document.getElementById(%q).click(); getComputedStyle(document.body).backgroundColor + getComputedStyle(document.querySelector("#bands path")).fill`, id), &c)
		colours[id] = c
	}
	if colours["c-dark"] == colours["c-light"] || colours["c-system"] != colours["c-light"] {
		t.Errorf("colours %v", colours)
	}
	b.call("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": "dark"}}}, nil)
	var c string
	b.eval(`getComputedStyle(document.body).backgroundColor + getComputedStyle(document.querySelector("#bands path")).fill`, &c)
	if c != colours["c-dark"] {
		t.Errorf("a system in dark shows %s", c)
	}
	if axe := os.Getenv("DRUMLIN_AXE"); axe != "" {
		checkAxe(t, b, axe, "dark")
	}
	b.call("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{}}, nil)
	if axe := os.Getenv("DRUMLIN_AXE"); axe != "" {
		checkAxe(t, b, axe, "light")
	}
}

// checkAxe runs the accessibility rules of the axe-core script at a path that
// the caller names; it is no part of this repository.
func checkAxe(t *testing.T, b *browser, path, when string) {
	t.Helper()
	src, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	b.eval(string(src)+";0", nil)
	var faults []string
	b.eval(`axe.run({runOnly: ["wcag2a", "wcag2aa", "wcag21aa", "wcag22aa", "best-practice"]}).then(r => [r.passes.length + " rules passed"].concat(r.violations.map(v => v.impact + " " + v.id + ": " + v.nodes.slice(0, 4).map(n => n.target + " " + n.failureSummary).join(" | "))))`, &faults)
	for _, f := range faults {
		if strings.HasPrefix(f, "serious") || strings.HasPrefix(f, "critical") {
			t.Errorf("axe, %s: %s", when, f)
		} else {
			t.Logf("axe, %s: %s", when, f)
		}
	}
}

// policyHolds tries what the policy forbids.
func policyHolds(t *testing.T, b *browser) {
	t.Helper()
	var ran string
	b.eval(`(() => { const s = document.createElement("script"); s.textContent = "window.intruder = 1"; document.body.append(s);
		const p = document.createElement("p"); p.setAttribute("style", "color: rgb(1, 2, 3)"); document.body.append(p);
		const i = new Image(); i.src = "http://127.0.0.1:9/x.png"; document.body.append(i);
		return String(window.intruder) + getComputedStyle(p).color; })()`, &ran)
	if strings.HasPrefix(ran, "1") || strings.Contains(ran, "rgb(1, 2, 3)") {
		t.Errorf("the policy let through: %s", ran)
	}
	var fetched string
	b.eval(`fetch("http://127.0.0.1:9/y").then(() => "went", e => e.name + ": " + e.message)`, &fetched)
	if len(b.seen("Log.entryAdded")) == 0 {
		t.Error("the policy was not asked")
	}
}

// onePage prints on one sheet of A4.
func onePage(t *testing.T, b *browser) {
	t.Helper()
	if n := len(printed(t, b)); n != 1 {
		t.Errorf("prints on %d pages", n)
	}
}

// printed returns the places of the pages in the PDF.
func printed(t *testing.T, b *browser) (at []int) {
	t.Helper()
	var pdf struct{ Data string }
	b.call("Page.printToPDF", map[string]any{"printBackground": false, "preferCSSPageSize": true}, &pdf)
	raw, err := base64.StdEncoding.DecodeString(pdf.Data)
	if err != nil {
		t.Fatal(err)
	}
	if dir := os.Getenv("DRUMLIN_SHOTS"); dir != "" {
		if err := os.WriteFile(filepath.Join(dir, "print.pdf"), raw, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	for i := 0; ; i++ {
		n := bytes.Index(raw[i:], []byte("/Type /Page\n"))
		if n < 0 {
			return at
		}
		i += n
		at = append(at, i)
	}
}

// phone looks for what does not fit 390 pixels.
func phone(t *testing.T, b *browser) {
	t.Helper()
	b.call("Emulation.setDeviceMetricsOverride", map[string]any{"width": 390, "height": 844, "deviceScaleFactor": 2, "mobile": true}, nil)
	var wide []string
	b.eval(`Array.from(document.querySelectorAll("body *")).filter(e => !e.closest(".scroll") && !e.closest("svg") && e.getBoundingClientRect().right > 391).map(e => e.outerHTML.slice(0, 80))`, &wide)
	for _, w := range wide {
		t.Errorf("wider than a phone: %s", w)
	}
	b.call("Emulation.clearDeviceMetricsOverride", nil, nil)
}

// A large page is ready within a second.
func TestBrowserLarge(t *testing.T) {
	if testing.Short() {
		t.Skip("starts a browser")
	}
	b := startBrowser(t)
	p := page(t)
	p.Release = release(t, 1024, 30, proj, 1)
	url := save(t, write(t, p))
	b.open(url)
	quiet(t, b, url)
	var ms float64
	b.eval(`performance.getEntriesByType("navigation")[0].domComplete`, &ms)
	t.Logf("complete after %.0f ms", ms)
	if ms > 1000 {
		t.Errorf("complete after %.0f ms, at most 1,000", ms)
	}
	onePage(t, b)
}
