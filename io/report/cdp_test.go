package report_test

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"sync"
	"testing"
	"time"
)

// browser speaks the DevTools protocol with a Chromium over two pipes: JSON
// texts ended by a zero byte.
type browser struct {
	t       *testing.T
	out     io.Writer
	session string
	mu      sync.Mutex
	next    int
	waiting map[int]chan reply
	events  []event
	arrived chan struct{}
}

type reply struct {
	Result json.RawMessage
	Error  *struct{ Message string }
}

type event struct {
	Method string
	Params json.RawMessage
}

// startBrowser starts a headless Chromium, or skips the test where none is
// installed (fails where DRUMLIN_CI=1 promises one).
func startBrowser(t *testing.T) *browser {
	t.Helper()
	var path string
	for _, name := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if p, err := exec.LookPath(name); err == nil {
			path = p
			break
		}
	}
	if path == "" {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatal("no Chromium, and DRUMLIN_CI=1 promises one")
		}
		t.Skip("no Chromium is installed: the page was not opened")
	}
	inRead, inWrite, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	outRead, outWrite, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	c := exec.Command(path, "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run", "--disable-background-networking", "--disable-component-update",
		"--disable-sync", "--hide-scrollbars", "--user-data-dir="+t.TempDir(), "--remote-debugging-pipe", "about:blank")
	c.ExtraFiles = []*os.File{inRead, outWrite}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	inRead.Close()
	outWrite.Close()
	b := &browser{t: t, out: inWrite, waiting: map[int]chan reply{}, arrived: make(chan struct{}, 1)}
	go b.read(outRead)
	t.Cleanup(func() {
		b.session = ""
		fmt.Fprintf(inWrite, `{"id":1000000,"method":"Browser.close"}`+"\x00")
		done := make(chan struct{})
		go func() { _ = c.Wait(); close(done) }()
		select {
		case <-done:
		case <-time.After(5 * time.Second):
			_ = c.Process.Kill()
			<-done
		}
		inWrite.Close()
		outRead.Close()
	})
	var target struct{ TargetID string }
	b.call("Target.createTarget", map[string]any{"url": "about:blank"}, &target)
	var attached struct{ SessionID string }
	b.call("Target.attachToTarget", map[string]any{"targetId": target.TargetID, "flatten": true}, &attached)
	b.session = attached.SessionID
	for _, domain := range []string{"Page", "Runtime", "Log", "Network"} {
		b.call(domain+".enable", nil, nil)
	}
	return b
}

func (b *browser) read(r io.Reader) {
	s := bufio.NewReaderSize(r, 1<<20)
	for {
		text, err := s.ReadBytes(0)
		if err != nil {
			return
		}
		var m struct {
			ID int
			reply
			event
		}
		if json.Unmarshal(bytes.TrimSuffix(text, []byte{0}), &m) != nil {
			continue
		}
		b.mu.Lock()
		if c := b.waiting[m.ID]; m.ID != 0 && c != nil {
			delete(b.waiting, m.ID)
			c <- m.reply
		} else if m.Method != "" {
			b.events = append(b.events, m.event)
			select {
			case b.arrived <- struct{}{}:
			default:
			}
		}
		b.mu.Unlock()
	}
}

// call runs one command and reads its result into out.
func (b *browser) call(method string, params map[string]any, out any) {
	b.t.Helper()
	b.mu.Lock()
	b.next++
	id := b.next
	c := make(chan reply, 1)
	b.waiting[id] = c
	b.mu.Unlock()
	m := map[string]any{"id": id, "method": method}
	if params != nil {
		m["params"] = params
	}
	if b.session != "" {
		m["sessionId"] = b.session
	}
	text, err := json.Marshal(m)
	if err != nil {
		b.t.Fatal(err)
	}
	if _, err := b.out.Write(append(text, 0)); err != nil {
		b.t.Fatal(err)
	}
	select {
	case r := <-c:
		if r.Error != nil {
			b.t.Fatalf("%s: %s", method, r.Error.Message)
		}
		if out != nil {
			if err := json.Unmarshal(r.Result, out); err != nil {
				b.t.Fatalf("%s: %v", method, err)
			}
		}
	case <-time.After(30 * time.Second):
		b.t.Fatalf("%s: no answer", method)
	}
}

// open loads an address and waits until it has loaded.
func (b *browser) open(url string) {
	b.t.Helper()
	b.mu.Lock()
	b.events = nil
	b.mu.Unlock()
	b.call("Page.navigate", map[string]any{"url": url}, nil)
	limit := time.After(30 * time.Second)
	for {
		if len(b.seen("Page.loadEventFired")) > 0 {
			return
		}
		select {
		case <-b.arrived:
		case <-limit:
			b.t.Fatal("the page did not load")
		}
	}
}

// seen returns the parameters of the events of one kind since open.
func (b *browser) seen(method string) (out []string) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, e := range b.events {
		if e.Method == method {
			out = append(out, string(e.Params))
		}
	}
	return out
}

// eval runs an expression in the page and reads its value into out.
func (b *browser) eval(expression string, out any) {
	b.t.Helper()
	var r struct {
		Result           struct{ Value json.RawMessage }
		ExceptionDetails *struct{ Text string }
	}
	b.call("Runtime.evaluate", map[string]any{"expression": expression, "returnByValue": true, "awaitPromise": true}, &r)
	if r.ExceptionDetails != nil {
		b.t.Fatalf("%s: %s", expression, r.ExceptionDetails.Text)
	}
	if out != nil && len(r.Result.Value) > 0 {
		if err := json.Unmarshal(r.Result.Value, out); err != nil {
			b.t.Fatal(err)
		}
	}
}

var keyCodes = map[string]int{"Tab": 9, " ": 32, "ArrowLeft": 37, "ArrowUp": 38, "ArrowRight": 39, "ArrowDown": 40, "Enter": 13}

// press presses and releases a key.
func (b *browser) press(key string) {
	b.t.Helper()
	code := key
	if key == " " {
		code = "Space"
	}
	p := map[string]any{"type": "keyDown", "key": key, "code": code, "windowsVirtualKeyCode": keyCodes[key]}
	if key == " " {
		p["text"] = " "
	}
	b.call("Input.dispatchKeyEvent", p, nil)
	b.call("Input.dispatchKeyEvent", map[string]any{"type": "keyUp", "key": key, "code": code, "windowsVirtualKeyCode": keyCodes[key]}, nil)
}
