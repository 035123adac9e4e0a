package report

import (
	"context"
	"encoding/json"
	"fmt"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	"github.com/chromedp/cdproto/page"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
)

// Environment of the browser tests.
const (
	needBrowser = "ULPINE_NEED_BROWSER" // 1: a missing browser is a failure
	shotsDir    = "ULPINE_SHOTS"        // a directory: screenshots and a PDF are left there to look at
)

// browser is a headless Chromium that keeps what its console says and what it
// asks the network for.
type browser struct {
	ctx context.Context
	mu  sync.Mutex
	bad []string
}

// TestBrowser opens pages in a headless Chromium: all parts in one browser, each
// in a tab of its own.
func TestBrowser(t *testing.T) {
	ctx := startBrowser(t)
	for _, part := range []struct {
		name string
		run  func(*testing.T, *browser)
	}{
		{"pages", browsePages},
		{"switches", browseSwitches},
		{"without scripts", browseWithoutScripts},
		{"dark", browseDark},
		{"shots", browseShots},
	} {
		t.Run(part.name, func(t *testing.T) { part.run(t, openTab(t, ctx)) })
	}
}

// startBrowser starts Chromium, or skips the test where there is none.
func startBrowser(t *testing.T) context.Context {
	t.Helper()
	path, err := exec.LookPath("chromium")
	if err != nil {
		if os.Getenv(needBrowser) == "1" {
			t.Fatalf("no chromium, and %s=1 asks for it: %v", needBrowser, err)
		}
		t.Skipf("skipped: no chromium to open the page in (%s=1 makes this a failure)", needBrowser)
	}
	options := append(chromedp.DefaultExecAllocatorOptions[:], // NoSandbox: Chromium refuses its sandbox to root
		chromedp.ExecPath(path), chromedp.NoSandbox, chromedp.UserDataDir(t.TempDir()), chromedp.WSURLReadTimeout(time.Minute))
	for _, f := range []string{"disable-gpu", "disable-quic", "no-first-run", "disable-background-networking", "disable-component-update", "disable-sync"} {
		options = append(options, chromedp.Flag(f, true))
	}
	alloc, stop := chromedp.NewExecAllocator(context.Background(), options...)
	t.Cleanup(stop)
	ctx, cancel := chromedp.NewContext(alloc)
	t.Cleanup(cancel)
	if err := chromedp.Do(ctx); err != nil {
		t.Fatalf("chromium does not start: %v", err)
	}
	return ctx
}

// openTab opens a tab that listens.
func openTab(t *testing.T, browserCtx context.Context) *browser {
	t.Helper()
	ctx, cancel := chromedp.NewContext(browserCtx)
	t.Cleanup(cancel)
	b := &browser{ctx: ctx}
	if err := chromedp.Do(ctx); err != nil {
		t.Fatal(err)
	}
	if err := chromedp.Listen(ctx, b.hear); err != nil {
		t.Fatal(err)
	}
	b.call(t, func(ctx context.Context, c *chromedp.Target) error {
		if _, err := cdp.Call(ctx, c, log.Enable, cdp.Empty{}); err != nil {
			return err
		}
		_, err := cdp.Call(ctx, c, network.Enable, network.EnableParams{})
		return err
	})
	return b
}

// hear keeps what no page of ours should cause.
func (b *browser) hear(ev any) {
	b.mu.Lock()
	defer b.mu.Unlock()
	switch e := ev.(type) {
	case *runtime.EventExceptionThrown:
		b.bad = append(b.bad, fmt.Sprintf("exception: %s at line %d: %+v", e.ExceptionDetails.Text, e.ExceptionDetails.LineNumber, e.ExceptionDetails.Exception))
	case *runtime.EventConsoleAPICalled:
		b.bad = append(b.bad, fmt.Sprintf("console %s: %v", e.Type, e.Args))
	case *log.EventEntryAdded:
		b.bad = append(b.bad, fmt.Sprintf("log: %+v", e.Entry))
	case *network.EventRequestWillBeSent:
		if !strings.HasPrefix(e.Request.URL, "file:") && !strings.HasPrefix(e.Request.URL, "data:") {
			b.bad = append(b.bad, "request: "+e.Request.URL)
		}
	}
}

// quiet fails when the console said something since the last call.
func (b *browser) quiet(t *testing.T, when string) {
	t.Helper()
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, s := range b.bad {
		t.Errorf("%s: %s", when, s)
	}
	b.bad = nil
}

func (b *browser) call(t *testing.T, f func(context.Context, *chromedp.Target) error) {
	t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, time.Minute)
	defer cancel()
	if err := chromedp.Do(ctx, chromedp.Func(f)); err != nil {
		t.Fatal(err)
	}
}

// open writes a study's page and opens it at a width.
func (b *browser) open(t *testing.T, s study, width int64) {
	t.Helper()
	file := filepath.Join(t.TempDir(), PageName)
	if err := os.WriteFile(file, []byte(pageOf(t, s.Study)), 0o644); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(b.ctx, time.Minute)
	defer cancel()
	u := url.URL{Scheme: "file", Path: file}
	if err := chromedp.Do(ctx, chromedp.EmulateViewport(width, 900), chromedp.Navigate(u.String())); err != nil {
		t.Fatal(err)
	}
}

// eval runs a script in the page and reads its value as JSON.
func eval[T any](t *testing.T, b *browser, script string) T {
	t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, time.Minute)
	defer cancel()
	s, err := chromedp.Run(ctx, chromedp.Evaluate[string]("JSON.stringify((() => {"+script+"})())"))
	if err != nil {
		t.Fatal(err)
	}
	var v T
	if err := json.Unmarshal([]byte(s), &v); err != nil {
		t.Fatal(err)
	}
	return v
}

// look runs the checks that hold for every page at every width.
func (b *browser) look(t *testing.T, when string, figures bool) {
	t.Helper()
	for _, s := range eval[[]string](t, b, overlapping) {
		t.Errorf("%s: words overlap: %s", when, s)
	}
	empty := eval[struct {
		N   int
		Out []string
	}](t, b, emptyFigures)
	for _, s := range empty.Out {
		t.Errorf("%s: an empty figure: %s", when, s)
	}
	if figures && empty.N < 7 {
		t.Errorf("%s: only %d figures are to be seen", when, empty.N)
	}
	for _, s := range eval[[]string](t, b, tooWide) {
		t.Errorf("%s: %s", when, s)
	}
	b.quiet(t, when)
}

// browsed are the widths at which a browser opens the pages of studies: those whose
// layout differs from the others'. TestFigures measures the figures of all of them.
var browsed = map[string][]int64{
	"usual":          {1280, 920, 800, 390},
	"empty":          {390},
	"forty arms":     {1280, 390},
	"grid":           {1280, 390},
	"one replicate":  {390},
	"all diverged":   {1280},
	"nothing finite": {390},
	"long names":     {1280, 390},
}

// browsePages opens pages, each once, and looks at them at their widths.
func browsePages(t *testing.T, b *browser) {
	seen := 0
	for _, s := range studies() {
		widths := browsed[s.name]
		if len(widths) == 0 || testing.Short() && seen > 1 {
			continue
		}
		seen++
		b.open(t, s, widths[0])
		for _, w := range widths {
			b.resize(t, w)
			b.look(t, fmt.Sprintf("%s at %d", s.name, w), s.name == "usual")
		}
		for _, fault := range eval[[]string](t, b, inaccessible) {
			t.Errorf("%s: %s", s.name, fault)
		}
	}
	if !testing.Short() && seen != len(browsed) {
		t.Errorf("%d of %d studies were opened", seen, len(browsed))
	}
}

// resize changes the width of the window.
func (b *browser) resize(t *testing.T, width int64) {
	t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, time.Minute)
	defer cancel()
	if err := chromedp.Do(ctx, chromedp.EmulateViewport(width, 900)); err != nil {
		t.Fatal(err)
	}
}

// browseSwitches uses every control of the page.
func browseSwitches(t *testing.T, b *browser) {
	b.open(t, study{"usual", invented()}, 1280)
	ground := func() string { return eval[string](t, b, `return getComputedStyle(document.body).backgroundColor`) }
	click := func(selector string) {
		t.Helper()
		eval[bool](t, b, `document.querySelector('`+selector+`').click(); return true`)
	}

	light := ground()
	click("#theme") // light
	click("#theme") // dark
	if ground() == light {
		t.Error("the theme switch does not darken the page")
	}
	click("#theme")
	if ground() != light {
		t.Error("the theme switch does not come back")
	}

	off := `return document.querySelectorAll('[data-curves] g.off').length`
	if n := eval[int](t, b, off); n != 0 {
		t.Errorf("%d arms are off at the start", n)
	}
	click(`.arm-switch[value="e4m3"]`)
	// The overview and the arm's own plot, each wide and narrow.
	if n := eval[int](t, b, off); n != 4 {
		t.Errorf("one switch turns %d groups off, want 4", n)
	}
	click("#arms-none")
	if n := eval[int](t, b, `return document.querySelectorAll('.arm-switch:checked').length`); n != 1 {
		t.Errorf("%d arms are left with the baseline only", n)
	}
	click("#arms-all")
	if n := eval[int](t, b, off); n != 0 {
		t.Errorf("%d arms are off after all were chosen", n)
	}

	singles := `return document.querySelectorAll('#figure-loss-by-arm .wide .singles path').length`
	click("#replicates")
	if n := eval[int](t, b, singles); n != 6*inventedReplicates {
		t.Errorf("%d single replicates are drawn", n)
	}
	click("#replicates")
	if n := eval[int](t, b, singles); n != 0 {
		t.Errorf("%d single replicates stay", n)
	}
	b.choice(t)
	b.crosshair(t)
	b.quiet(t, "switches")
}

// choice goes through the figures of which one is shown at a time.
func (b *browser) choice(t *testing.T) {
	t.Helper()
	shown := `return [...document.querySelectorAll('[data-choice]')].filter(e => e.getClientRects().length).map(e => e.dataset.choice)`
	for _, id := range []string{"kept-signal", "gradient-direction", "update-bias", "signal-map", "kept-signal"} {
		eval[bool](t, b, `document.querySelector('input[value="`+id+`"]').click(); return true`)
		if got := eval[[]string](t, b, shown); len(got) != 1 || got[0] != id {
			t.Errorf("after %s was chosen, %v is shown", id, got)
		}
		b.look(t, id, true)
	}
}

// crosshair moves over the first curve with the pointer and with keys, and
// rests on a replicate for its tooltip.
func (b *browser) crosshair(t *testing.T) {
	t.Helper()
	readout := `return document.querySelector('#figure-training-loss .readout').textContent`
	if s := eval[string](t, b, readout); s != "" {
		t.Errorf("the readout says %q before anything is pointed at", s)
	}
	move := func(x, y string) string {
		return `const svg = document.querySelector('#figure-training-loss .wide svg'); svg.scrollIntoView();
		const p = JSON.parse(svg.dataset.panels)[0].box, m = svg.getScreenCTM();
		const at = new DOMPoint(p[0] + (p[2] - p[0]) * ` + x + `, p[1] + (p[3] - p[1]) * ` + y + `).matrixTransform(m);
		svg.dispatchEvent(new PointerEvent('pointermove', {clientX: at.x, clientY: at.y, bubbles: true})); return true`
	}
	eval[bool](t, b, move("0.5", "0.5"))
	s := eval[string](t, b, readout)
	if !strings.Contains(s, "epoch 7.") || !strings.Contains(s, "FP32 0.") || !strings.Contains(s, "2 bf16 nearest 0.") {
		t.Errorf("in the middle of the curves the readout says %q", s)
	}
	if n := eval[int](t, b, `return document.querySelectorAll('#figure-training-loss .wide .cross').length`); n != 1 {
		t.Errorf("%d crosshairs", n)
	}
	eval[bool](t, b, `const svg = document.querySelector('#figure-training-loss .wide svg'); svg.focus();
		svg.dispatchEvent(new KeyboardEvent('keydown', {key: 'ArrowRight', bubbles: true, cancelable: true})); return true`)
	if next := eval[string](t, b, readout); next == s {
		t.Error("an arrow key does not move the crosshair")
	}
	tip := eval[string](t, b, `const g = document.querySelector('#figure-margin-rail .wide [data-tip^="replicate 103"]');
		g.firstChild.dispatchEvent(new PointerEvent('pointermove', {clientX: 300, clientY: 300, bubbles: true}));
		const tip = document.getElementById('tip'); return tip.hidden ? '' : tip.textContent`)
	if !strings.HasPrefix(tip, "replicate 103: ") {
		t.Errorf("the tooltip of a replicate says %q", tip)
	}
}

// browseWithoutScripts: the page says everything, and offers no dead
// switches.
func browseWithoutScripts(t *testing.T, b *browser) {
	b.call(t, func(ctx context.Context, c *chromedp.Target) error {
		_, err := cdp.Call(ctx, c, emulation.SetScriptExecutionDisabled, emulation.SetScriptExecutionDisabledParams{Value: true})
		return err
	})
	b.open(t, study{"usual", invented()}, 800)
	if s := eval[string](t, b, `return [...document.querySelectorAll('.sentence')].map(e => e.textContent).join(' ')`); s != invented().Answer {
		t.Errorf("the answer is %q", s)
	}
	if eval[bool](t, b, `return [...document.querySelectorAll('.controls, .switches')].some(e => e.getClientRects().length)`) {
		t.Error("switches show without the script that works them")
	}
	if n := eval[int](t, b, `return document.querySelectorAll('figure svg g > title').length`); n < 60 {
		t.Errorf("only %d marks carry a title", n)
	}
	b.look(t, "without scripts", true)
}

// browseDark: the dark theme follows the system, and paper stays light.
func browseDark(t *testing.T, b *browser) {
	media := func(kind, scheme string) {
		b.call(t, func(ctx context.Context, c *chromedp.Target) error {
			_, err := cdp.Call(ctx, c, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{
				Media: kind, Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}},
			})
			return err
		})
	}
	media("screen", "dark")
	b.open(t, study{"usual", invented()}, 1280)
	ground := `return getComputedStyle(document.body).backgroundColor`
	if got := eval[string](t, b, ground); got != "rgb(17, 25, 31)" {
		t.Errorf("dark paper is %s", got)
	}
	b.shot(t, "dark")
	media("print", "dark")
	if got := eval[string](t, b, ground); got != "rgb(252, 253, 252)" {
		t.Errorf("printed paper is %s", got)
	}
	if eval[bool](t, b, `return [...document.querySelectorAll('.narrow, .controls, .contents')].some(e => e.getClientRects().length)`) {
		t.Error("paper shows what is for screens")
	}
	b.quiet(t, "dark")
}

// shot leaves a picture of the whole page where the environment asks for it.
func (b *browser) shot(t *testing.T, name string) {
	t.Helper()
	dir := os.Getenv(shotsDir)
	if dir == "" {
		return
	}
	ctx, cancel := context.WithTimeout(b.ctx, time.Minute)
	defer cancel()
	png, err := chromedp.Run(ctx, chromedp.FullScreenshot(100))
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, name+".png"), png, 0o644); err != nil {
		t.Fatal(err)
	}
}

// browseShots leaves pictures to look at: ULPINE_SHOTS=DIR go test -run TestBrowser/shots.
func browseShots(t *testing.T, b *browser) {
	dir := os.Getenv(shotsDir)
	if dir == "" {
		t.Skipf("skipped: %s names no directory for pictures", shotsDir)
	}
	for _, s := range []study{{"usual", invented()}, {"forty", manyArms(40)}, {"grid", gridStudy()}} {
		for _, w := range []int64{1280, 390} {
			b.open(t, s, w)
			b.shot(t, fmt.Sprintf("%s-%d", s.name, w))
		}
	}
	b.open(t, study{"usual", invented()}, 1280)
	b.call(t, func(ctx context.Context, c *chromedp.Target) error {
		yes := true
		res, err := cdp.Call(ctx, c, page.PrintToPDF, page.PrintToPDFParams{PreferCSSPageSize: &yes})
		if err != nil {
			return err
		}
		return os.WriteFile(filepath.Join(dir, "print.pdf"), res.Data, 0o644)
	})
}
