//go:build outside

package main

import (
	"bufio"
	"encoding/base64"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"
)

// A chromium is a headless browser with one page, driven by the DevTools protocol over a
// pair of pipes: documents with a zero byte after each.
type chromium struct {
	t       *testing.T
	in      *os.File
	session string

	mu      sync.Mutex
	next    int
	answers map[int]chan answer
	wrong   []string // exceptions, console errors, log entries of the browser
	asked   []string // addresses that the page asked for
	loaded  chan struct{}
}

type answer struct {
	Result json.RawMessage
	Error  *struct{ Message string }
}

// startChromium starts Debian's browser; it ends with the test. No name resolves in it.
func startChromium(t *testing.T) *chromium {
	t.Helper()
	toIn, toOut, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	fromIn, fromOut, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("chromium", "--headless=new", "--no-sandbox", "--disable-gpu", "--no-first-run", "--hide-scrollbars",
		"--remote-debugging-pipe", "--host-resolver-rules=MAP * ~NOTFOUND, EXCLUDE 127.0.0.1", "--user-data-dir="+t.TempDir())
	cmd.ExtraFiles = []*os.File{toIn, fromOut} // its descriptors 3 and 4
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	toIn.Close()
	fromOut.Close()
	b := &chromium{t: t, in: toOut, answers: map[int]chan answer{}, loaded: make(chan struct{}, 100)}
	t.Cleanup(func() {
		b.in.Write([]byte(`{"id":1000000,"method":"Browser.close"}` + "\x00"))
		done := make(chan struct{})
		go func() { cmd.Wait(); close(done) }()
		select {
		case <-done:
		case <-time.After(10 * time.Second):
			cmd.Process.Kill()
			<-done
		}
		toOut.Close()
		fromIn.Close()
	})
	go b.listen(fromIn)
	var target struct{ TargetID string }
	b.call("Target.createTarget", map[string]any{"url": "about:blank"}, &target)
	var session struct{ SessionID string }
	b.call("Target.attachToTarget", map[string]any{"targetId": target.TargetID, "flatten": true}, &session)
	b.session = session.SessionID
	for _, domain := range []string{"Page", "Runtime", "Log", "Network"} {
		b.call(domain+".enable", nil, nil)
	}
	return b
}

// listen hands answers to who waits for them and keeps what went wrong.
func (b *chromium) listen(f *os.File) {
	r := bufio.NewReaderSize(f, 1<<20)
	for {
		text, err := r.ReadBytes(0)
		if err != nil {
			return
		}
		var m struct {
			answer
			ID     int
			Method string
			Params struct {
				Type, Text       string
				Args             []struct{ Value any }
				ExceptionDetails struct {
					Text      string
					Exception struct{ Description string }
				}
				Entry   struct{ Level, Text, URL string }
				Request struct{ URL string }
			}
		}
		if json.Unmarshal(text[:len(text)-1], &m) != nil {
			continue
		}
		b.mu.Lock()
		p := &m.Params
		switch m.Method {
		case "":
			if c := b.answers[m.ID]; c != nil {
				c <- m.answer
				delete(b.answers, m.ID)
			}
		case "Page.loadEventFired":
			b.loaded <- struct{}{}
		case "Runtime.exceptionThrown":
			b.wrong = append(b.wrong, p.ExceptionDetails.Text+" "+p.ExceptionDetails.Exception.Description)
		case "Runtime.consoleAPICalled":
			if p.Type == "error" || p.Type == "warning" {
				b.wrong = append(b.wrong, fmt.Sprint("console: ", p.Args))
			}
		case "Log.entryAdded":
			if p.Entry.Level == "error" || p.Entry.Level == "warning" {
				b.wrong = append(b.wrong, p.Entry.Text+" "+p.Entry.URL)
			}
		case "Network.requestWillBeSent":
			b.asked = append(b.asked, p.Request.URL)
		}
		b.mu.Unlock()
	}
}

// call calls a method of the protocol.
func (b *chromium) call(method string, params map[string]any, result any) {
	b.t.Helper()
	c := make(chan answer, 1)
	b.mu.Lock()
	b.next++
	id := b.next
	b.answers[id] = c
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
	if _, err := b.in.Write(append(text, 0)); err != nil {
		b.t.Fatal(err)
	}
	select {
	case a := <-c:
		if a.Error != nil {
			b.t.Fatalf("%s: %s", method, a.Error.Message)
		}
		if result != nil {
			if err := json.Unmarshal(a.Result, result); err != nil {
				b.t.Fatalf("%s: %v", method, err)
			}
		}
	case <-time.After(2 * time.Minute):
		b.t.Fatalf("%s: no answer", method)
	}
}

// size sets the window [CSS px].
func (b *chromium) size(w, h int) {
	b.call("Emulation.setDeviceMetricsOverride", map[string]any{"width": w, "height": h, "deviceScaleFactor": 1, "mobile": false}, nil)
}

// visit loads an address.
func (b *chromium) visit(url string) {
	b.t.Helper()
	b.call("Page.navigate", map[string]any{"url": url}, nil)
	select {
	case <-b.loaded:
	case <-time.After(time.Minute):
		b.t.Fatalf("%s does not load", url)
	}
}

// eval evaluates JavaScript into v; a promise is waited for.
func (b *chromium) eval(js string, v any) {
	b.t.Helper()
	var r struct {
		Result           struct{ Value json.RawMessage }
		ExceptionDetails *struct {
			Text      string
			Exception struct{ Description string }
		}
	}
	b.call("Runtime.evaluate", map[string]any{"expression": js, "awaitPromise": true, "returnByValue": true}, &r)
	if e := r.ExceptionDetails; e != nil {
		b.t.Fatalf("%s: %s %s", js, e.Text, e.Exception.Description)
	}
	if v != nil {
		if err := json.Unmarshal(r.Result.Value, v); err != nil {
			b.t.Fatalf("%s: %s: %v", js, r.Result.Value, err)
		}
	}
}

// wait waits until JavaScript is true.
func (b *chromium) wait(js string) {
	b.t.Helper()
	for end := time.Now().Add(2 * time.Minute); time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
		var yes bool
		if b.eval("Boolean("+js+")", &yes); yes {
			return
		}
	}
	b.clean("")
	b.t.Fatalf("never: %s", js)
}

// mouse presses at one point and lets go at another [CSS px of the window].
func (b *chromium) mouse(x, y, toX, toY float64) {
	send := func(kind string, x, y float64, buttons int) {
		b.call("Input.dispatchMouseEvent", map[string]any{"type": kind, "x": x, "y": y, "button": "left", "buttons": buttons, "clickCount": 1}, nil)
	}
	send("mouseMoved", x, y, 0)
	send("mousePressed", x, y, 1)
	if x != toX || y != toY {
		send("mouseMoved", (x+toX)/2, (y+toY)/2, 1)
		send("mouseMoved", toX, toY, 1)
	}
	send("mouseReleased", toX, toY, 0)
}

// key presses a key by its name, Enter with its text.
func (b *chromium) key(name string) {
	down := map[string]any{"type": "rawKeyDown", "key": name, "code": name}
	switch name {
	case "Enter":
		down["type"], down["text"], down["windowsVirtualKeyCode"] = "keyDown", "\r", 13
	case "Tab":
		down["windowsVirtualKeyCode"] = 9
	}
	b.call("Input.dispatchKeyEvent", down, nil)
	b.call("Input.dispatchKeyEvent", map[string]any{"type": "keyUp", "key": name, "code": name}, nil)
}

// picture keeps the whole page as a PNG in the folder that SCREENSHOTS names, if it does,
// and fails if the page is wider than its window.
func (b *chromium) picture(name string) {
	b.t.Helper()
	var wide [2]int
	b.eval("[document.documentElement.scrollWidth, innerWidth]", &wide)
	if wide[0] > wide[1] {
		b.t.Errorf("%s: the page is %d wide in a window of %d", name, wide[0], wide[1])
	}
	dir := os.Getenv("SCREENSHOTS")
	if dir == "" {
		return
	}
	var shot struct{ Data string }
	b.call("Page.captureScreenshot", map[string]any{"captureBeyondViewport": true}, &shot)
	data, err := base64.StdEncoding.DecodeString(shot.Data)
	if err == nil {
		err = os.WriteFile(filepath.Join(dir, name+".png"), data, 0o666)
	}
	if err != nil {
		b.t.Error(err)
	}
}

// clean fails if anything went wrong so far or the page asked for anything that does not
// begin with base.
func (b *chromium) clean(base string) {
	b.t.Helper()
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, w := range b.wrong {
		b.t.Errorf("browser: %s", w)
	}
	for _, url := range b.asked {
		if !strings.HasPrefix(url, base) && !strings.HasPrefix(url, "data:") {
			b.t.Errorf("the page asked for %s", url)
		}
	}
	if len(b.asked) == 0 {
		b.t.Error("no request was seen")
	}
	b.wrong, b.asked = nil, nil
}
