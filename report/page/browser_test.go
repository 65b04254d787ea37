package page

import (
	"context"
	"flag"
	"fmt"
	"math"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/emulation"
	cdplog "github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	cdppage "github.com/chromedp/cdproto/page"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

var pictures = flag.String("pictures", "", "folder for pictures of the pages, to be looked at")

// TestBrowser opens pages in a real browser, one for all tests.
func TestBrowser(t *testing.T) {
	path := ""
	for _, name := range []string{"chromium", "chromium-browser"} {
		if p, err := exec.LookPath(name); err == nil {
			path = p
			break
		}
	}
	if path == "" {
		if os.Getenv("CI") != "" {
			t.Fatal("no browser to open the page in; Debian's package is chromium")
		}
		t.Skip("no browser to open the page in; Debian's package is chromium")
	}
	allocator, cancel := chromedp.NewExecAllocator(context.Background(),
		chromedp.ExecPath(path), chromedp.Headless, chromedp.NoSandbox, chromedp.DisableGPU, chromedp.NoFirstRun,
		chromedp.UserDataDir(t.TempDir()), chromedp.Flag("disable-quic", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true))
	defer cancel()
	browser, cancel := chromedp.NewContext(allocator)
	defer cancel()
	if err := chromedp.Do(browser); err != nil {
		t.Fatal(err)
	}
	for name, test := range map[string]func(*testing.T, context.Context){"one part": onePart, "lot": aLot, "contrast": contrasts, "no script": noScript, "print": printed} {
		t.Run(name, func(t *testing.T) {
			tab, cancel := chromedp.NewContext(browser)
			defer cancel()
			if err := chromedp.Do(tab); err != nil {
				t.Fatal(err)
			}
			limited, cancel := context.WithTimeout(tab, 40*time.Second)
			defer cancel()
			test(t, limited)
		})
	}
}

// watch collects what a page says on the console and what it asks for.
type watch struct {
	sync.Mutex
	console, requests []string
}

func observe(t *testing.T, ctx context.Context) *watch {
	t.Helper()
	w := new(watch)
	err := chromedp.Listen(ctx, func(event any) {
		w.Lock()
		defer w.Unlock()
		switch e := event.(type) {
		case *runtime.EventConsoleAPICalled:
			w.console = append(w.console, string(e.Type))
		case *runtime.EventExceptionThrown:
			w.console = append(w.console, "exception: "+e.ExceptionDetails.Text)
		case *cdplog.EventEntryAdded:
			w.console = append(w.console, e.Entry.Text)
		case *network.EventRequestWillBeSent:
			w.requests = append(w.requests, e.Request.URL)
		case *cdppage.EventJavascriptDialogOpening:
			w.console = append(w.console, "dialog: "+e.Message)
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	return w
}

func open(t *testing.T, ctx context.Context, name, html string) (*watch, string) {
	t.Helper()
	path := filepath.Join(t.TempDir(), name+".html")
	if err := os.WriteFile(path, []byte(html), 0o666); err != nil {
		t.Fatal(err)
	}
	address := (&url.URL{Scheme: "file", Path: path}).String()
	w := observe(t, ctx)
	call(t, ctx, network.Enable, network.EnableParams{})
	call(t, ctx, cdplog.Enable, cdp.Empty{})
	run(t, ctx, chromedp.Navigate(address), chromedp.WaitReady(chromedp.CSS("footer")))
	return w, address
}

func run(t *testing.T, ctx context.Context, actions ...chromedp.Action[chromedp.Void]) {
	t.Helper()
	if err := chromedp.Do(ctx, actions...); err != nil {
		t.Fatal(err)
	}
}

func call[P, R any](t *testing.T, ctx context.Context, command cdp.Command[P, R], parameters P) R {
	t.Helper()
	r, err := chromedp.Call(ctx, command, parameters)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func get[T any](t *testing.T, ctx context.Context, action chromedp.Action[T]) T {
	t.Helper()
	out, err := chromedp.Run(ctx, action)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func evaluate[T any](t *testing.T, ctx context.Context, script string) T {
	t.Helper()
	return get(t, ctx, chromedp.Evaluate[T](script))
}

func (w *watch) check(t *testing.T, address string) {
	t.Helper()
	w.Lock()
	defer w.Unlock()
	if len(w.console) > 0 {
		t.Errorf("the page says on the console: %q", w.console)
	}
	for _, r := range w.requests {
		if r != address && r != "data:," {
			t.Errorf("the page asked for %s", r)
		}
	}
	if len(w.requests) == 0 {
		t.Error("no request was seen, not even the page's own: the watch does not work")
	}
}

func onePart(t *testing.T, ctx context.Context) {
	p := single(t)
	w, address := open(t, ctx, "single", render(t, p))
	run(t, ctx, chromedp.EmulateViewport(1280, 900), chromedp.ScrollIntoView(chromedp.CSS(".figures")),
		chromedp.WaitReady(chromedp.CSS(".cursor")))

	// Every figure has its points: as many diamonds as there are points with
	// a place on the axes, in paths of the property's colour.
	traces := p.Parts[0].Traces
	type seen struct {
		Name  string
		Dots  int
		Lines int
		Box   float64
	}
	got := evaluate[[]seen](t, ctx, `[...document.querySelectorAll(".plot")].map(p => ({
		Name: p.getAttribute("aria-label").split(".")[0],
		Dots: [...p.querySelectorAll('path[style*="fill:var(--measured)"]')].map(e => e.getAttribute("d").split("z").length - 1).reduce((a, b) => a + b, 0),
		Lines: [...p.querySelectorAll('path[style*="stroke:var(--model)"]')].length,
		Box: Math.min(...[...p.querySelectorAll('path[style*="fill:var(--measured)"]')].map(e => e.getBoundingClientRect().width)),
	}))`)
	if len(got) != 5 {
		t.Fatalf("%d figures, want 5", len(got))
	}
	positive := 0
	for _, z := range traces.Measured {
		if real(z) > 0 {
			positive++
		}
	}
	for i, s := range got {
		want := len(traces.Freq)
		if i == 2 { // resistance, on a logarithmic axis
			if s.Dots > positive || s.Dots < positive/2 {
				t.Errorf("%s: %d points drawn, of %d that are positive", s.Name, s.Dots, positive)
			}
		} else if s.Dots != want {
			t.Errorf("%s: %d points drawn, want %d", s.Name, s.Dots, want)
		}
		if s.Lines == 0 {
			t.Errorf("%s: no line of the fit or its scatter", s.Name)
		}
		if !(s.Box > 200) {
			t.Errorf("%s: the points span %v pixels", s.Name, s.Box)
		}
	}
	// Colours come from the style sheet: none was left as a token.
	if n := evaluate[int](t, ctx, `document.documentElement.innerHTML.split("#00000").length - 1`); n != 0 {
		t.Errorf("%d colours are left without their property", n)
	}

	// The readout follows the pointer to the nearest point.
	const row = `[...document.querySelectorAll(".readout caption, .readout td")].map(e => e.textContent)`
	for _, u := range []float64{0, 0.31, 0.77, 1} {
		box := evaluate[struct{ X, Y, Width, Height float64 }](t, ctx, `(() => { const p = document.querySelectorAll(".plot")[1]; p.scrollIntoView({block: "center"});
			const r = p.getBoundingClientRect(), a = p.dataset.area.split(" ").map(Number);
			return {X: r.left + a[0]*r.width, Y: r.top + r.height/2, Width: (a[1]-a[0])*r.width, Height: r.height}; })()`)
		run(t, ctx, chromedp.MouseEvent("mouseMoved", box.X+u*box.Width, box.Y))
		cells := evaluate[[]string](t, ctx, row)
		i := int(math.Round(u * float64(len(traces.Freq)-1)))
		want := reading(traces.Freq[i], "Hz")
		if cells[0] != want {
			t.Errorf("at %v of the axis the readout says %q, want %q", u, cells[0], want)
		}
		z := traces.Measured[i]
		if want := reading(math.Hypot(real(z), imag(z)), "Ω"); cells[1] != want {
			t.Errorf("at %v of the axis |Z| is %q, want %q", u, cells[1], want)
		}
		residual, err := strconv.ParseFloat(strings.TrimSuffix(cells[5], " %"), 64)
		if err != nil || math.Abs(residual-100*real(traces.Residual[i])) > 0.051*math.Abs(residual)+0.001 {
			t.Errorf("at %v of the axis the residual is %q, want %.3g %%", u, cells[5], 100*real(traces.Residual[i]))
		}
		at := evaluate[float64](t, ctx, `document.querySelectorAll(".plot")[1].querySelector(".cursor").getBoundingClientRect().left`)
		if math.Abs(at-(box.X+u*box.Width)) > box.Width/400+2 {
			t.Errorf("the cursor is at %v, the pointer at %v", at, box.X+u*box.Width)
		}
	}
	// And the keyboard.
	run(t, ctx, chromedp.Focus(chromedp.CSS(".readout input")), chromedp.KeyEvent(kb.Home))
	if cells := evaluate[[]string](t, ctx, row); cells[0] != "100.0 Hz" {
		t.Errorf("Home leads to %q", cells[0])
	}
	run(t, ctx, chromedp.KeyEvent(kb.ArrowRight))
	if cells := evaluate[[]string](t, ctx, row); cells[0] != reading(traces.Freq[1], "Hz") {
		t.Errorf("→ leads to %q", cells[0])
	}
	overflow(t, ctx)
	w.check(t, address)
	photograph(t, ctx, "single")
}

// reading is how the page writes a number: four digits and a prefix.
func reading(v float64, unit string) string {
	prefixes := []string{"p", "n", "µ", "m", "", "k", "M", "G"}
	exponent, _ := strconv.Atoi(strconv.FormatFloat(v, 'e', 3, 64)[6:])
	step := int(math.Floor(float64(exponent) / 3))
	return strconv.FormatFloat(v/math.Pow10(3*step), 'f', 3-(exponent-3*step), 64) + " " + prefixes[step+4] + unit
}

// overflow checks that no width of window makes the page scroll sideways.
func overflow(t *testing.T, ctx context.Context) {
	t.Helper()
	for _, width := range []int64{360, 768, 1280, 1920} {
		run(t, ctx, chromedp.EmulateViewport(width, 900))
		if over := evaluate[float64](t, ctx, `document.documentElement.scrollWidth - window.innerWidth`); over > 0 {
			t.Errorf("at %d px the page is %v px too wide", width, over)
		}
		if width < 1280 {
			continue
		}
		// On a desk no table or drawing has to be scrolled sideways.
		for _, name := range evaluate[[]string](t, ctx, `[...document.querySelectorAll(".scroll")].filter(e => e.scrollWidth > e.clientWidth).map(e => e.getAttribute("aria-label") || e.getAttribute("aria-labelledby"))`) {
			t.Errorf("at %d px %q scrolls sideways", width, name)
		}
	}
}

func aLot(t *testing.T, ctx context.Context) {
	p := lot(t, 12)
	w, address := open(t, ctx, "lot", render(t, p))
	run(t, ctx, chromedp.EmulateViewport(1280, 900))

	// A name that looks like markup is text.
	if title := evaluate[string](t, ctx, `document.title`); title != "lot-heron, lot-otter: 12 parts" {
		t.Errorf("title %q", title)
	}
	if n := evaluate[int](t, ctx, `document.querySelectorAll("img").length`); n != 0 {
		t.Errorf("%d images", n)
	}
	names := func() []string {
		return evaluate[[]string](t, ctx, `[...document.querySelectorAll(".index tbody tr:not([hidden]) th")].map(e => e.textContent)`)
	}
	all := names()
	if len(all) != 12 || all[9] != hostile {
		t.Errorf("index: %q", all)
	}

	// Sorting by a value: rising, falling, unknown ones last.
	column := `[...document.querySelectorAll(".index thead button")].find(b => b.textContent === "C")`
	sorts := `(() => { const i = ` + column + `.closest("th").cellIndex; return [...document.querySelectorAll(".index tbody tr")].map(r => r.cells[i].dataset.sort); })()`
	for _, falling := range []bool{false, true} {
		run(t, ctx, chromedp.Evaluate[chromedp.Void](column+`.click()`))
		var last *float64
		known := 0
		for _, text := range evaluate[[]string](t, ctx, sorts) {
			if text == "" {
				if known < 10 {
					t.Errorf("a part without a value after %d with one", known)
				}
				continue
			}
			v, err := strconv.ParseFloat(text, 64)
			if err != nil {
				t.Fatal(err)
			}
			if last != nil && (v < *last) != falling && v != *last {
				t.Errorf("falling %v: %v after %v", falling, v, *last)
			}
			last = &v
			known++
		}
		want := "ascending"
		if falling {
			want = "descending"
		}
		if got := evaluate[string](t, ctx, column+`.closest("th").getAttribute("aria-sort")`); got != want {
			t.Errorf("aria-sort %q, want %q", got, want)
		}
	}

	// Filtering.
	run(t, ctx, chromedp.SendKeys(chromedp.CSS(".filter input"), "otter no result"))
	if got := names(); len(got) != 1 || got[0] != "c999" {
		t.Errorf("filtered: %q", got)
	}
	if got := evaluate[string](t, ctx, `document.querySelector(".filter output").textContent`); got != "1 of 12 parts" {
		t.Errorf("count %q", got)
	}
	run(t, ctx, chromedp.Evaluate[chromedp.Void](`(() => { const i = document.querySelector(".filter input"); i.value = ""; i.dispatchEvent(new Event("input")); })()`))
	if got := names(); len(got) != 12 {
		t.Errorf("%d parts after the filter was emptied", len(got))
	}

	// A link of the index leads to its part, whose readout is at work.
	run(t, ctx, chromedp.Evaluate[chromedp.Void](`document.querySelector('.index a[href="#part-7"]').click()`),
		chromedp.WaitReady(chromedp.CSS("#part-7 .cursor")))
	if top := evaluate[float64](t, ctx, `document.querySelector("#part-7").getBoundingClientRect().top`); math.Abs(top) > 100 {
		t.Errorf("the part is %v px from the top of the window", top)
	}
	if text := evaluate[string](t, ctx, `document.querySelector("#part-7 .readout caption").textContent`); !strings.HasSuffix(text, "Hz") {
		t.Errorf("its readout says %q", text)
	}

	// All that can be focused has a name; every id is unique; links lead
	// somewhere.
	type fault struct{ What, Where string }
	faults := evaluate[[]fault](t, ctx, `(() => {
		const out = [], ids = new Set();
		for (const e of document.querySelectorAll("[id]")) { if (ids.has(e.id)) out.push({What: "twice", Where: e.id}); ids.add(e.id); }
		for (const e of document.querySelectorAll('a[href^="#"]')) if (!ids.has(e.getAttribute("href").slice(1))) out.push({What: "leads nowhere", Where: e.href});
		for (const e of document.querySelectorAll("button, input, [tabindex], [role=img]")) {
			const by = e.getAttribute("aria-labelledby");
			const name = e.getAttribute("aria-label") || (by && document.getElementById(by).textContent) || e.textContent || (e.labels && e.labels[0] && e.labels[0].textContent);
			if (!name || !name.trim()) out.push({What: "no name", Where: e.outerHTML.slice(0, 80)});
		}
		return out;
	})()`)
	if len(faults) > 0 {
		t.Errorf("%v", faults)
	}
	overflow(t, ctx)
	w.check(t, address)
	photograph(t, ctx, "lot")
}

// noScript: without the script everything is there but the readout and the
// filter.
func noScript(t *testing.T, ctx context.Context) {
	call(t, ctx, emulation.SetScriptExecutionDisabled, emulation.SetScriptExecutionDisabledParams{Value: true})
	open(t, ctx, "lot", render(t, lot(t, 5)))
	count := func(selector string) int {
		return len(get(t, ctx, chromedp.Nodes(chromedp.CSSAll(selector))))
	}
	for selector, want := range map[string]int{".index tbody tr": 5, ".plot svg": 20, ".at": 4, "section.part": 5, "#cautions li": 3} {
		if got := count(selector); got != want {
			t.Errorf("%d of %q, want %d", got, selector, want)
		}
	}
	run(t, ctx, chromedp.WaitVisible(chromedp.CSS(".plot svg")), chromedp.WaitNotVisible(chromedp.CSS(".readout")), chromedp.WaitNotVisible(chromedp.CSS(".filter")))
}

// printed: a part takes two sheets of A4 and of Letter, the figures on the
// first; what is of use on a screen only is left out.
func printed(t *testing.T, ctx context.Context) {
	open(t, ctx, "single", render(t, single(t)))
	for name, paper := range map[string]chromedp.PaperSize{"A4": chromedp.PaperA4, "Letter": chromedp.PaperLetter} {
		pdf := get(t, ctx, chromedp.PrintToPDF(chromedp.PDFPaper(paper)))
		if n := len(regexp.MustCompile(`/Type\s*/Page\b[^s]`).FindAll(pdf, -1)); n != 2 {
			t.Errorf("%d pages of %s, want 2", n, name)
		}
	}
	call(t, ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Media: "print"})
	for _, selector := range []string{".readout", ".skip", ".nav"} {
		if d := evaluate[string](t, ctx, `getComputedStyle(document.querySelector("`+selector+`")).display`); d != "none" {
			t.Errorf("%s is printed", selector)
		}
	}
}

// contrasts: text has the contrast that WCAG 2.2 asks for (success criterion 1.4.3: 4.5 to
// 1), marks in figures 3 to 1 (1.4.11), in light and dark.
func contrasts(t *testing.T, ctx context.Context) {
	open(t, ctx, "single", render(t, single(t)))
	for _, scheme := range []string{"light", "dark"} {
		call(t, ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}})
		colours := evaluate[map[string]string](t, ctx, `(() => { const s = getComputedStyle(document.documentElement), out = {};
			for (const n of ["paper", "raised", "ink", "muted", "link", "measured", "model", "second", "resonance", "warn"]) out[n] = s.getPropertyValue("--" + n).trim();
			return out; })()`)
		check := func(a, b string, least float64) {
			t.Helper()
			if c := contrast(t, colours[a], colours[b]); !(c >= least) {
				t.Errorf("%s: %s on %s has a contrast of %.2f, want %v", scheme, a, b, c, least)
			}
		}
		for _, text := range []string{"ink", "muted", "link"} {
			check(text, "paper", 4.5)
		}
		check("ink", "raised", 4.5)
		check("muted", "raised", 4.5)
		check("ink", "warn", 4.5)
		for _, mark := range []string{"measured", "model", "second", "resonance"} {
			check(mark, "paper", 3)
		}
	}
}

func contrast(t *testing.T, a, b string) float64 {
	t.Helper()
	luminance := func(hex string) float64 {
		v, err := strconv.ParseUint(strings.TrimPrefix(hex, "#"), 16, 32)
		if err != nil || len(hex) != 7 {
			t.Fatalf("colour %q: %v", hex, err)
		}
		sum := 0.0
		for i, weight := range []float64{0.2126, 0.7152, 0.0722} {
			c := float64(v>>(16-8*i)&0xff) / 255
			if c <= 0.04045 {
				c /= 12.92
			} else {
				c = math.Pow((c+0.055)/1.055, 2.4)
			}
			sum += weight * c
		}
		return sum
	}
	x, y := luminance(a), luminance(b)
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

// photograph takes pictures where -pictures asks for them.
func photograph(t *testing.T, ctx context.Context, name string) {
	t.Helper()
	if *pictures == "" {
		return
	}
	save := func(file string, content []byte) {
		if err := os.WriteFile(filepath.Join(*pictures, file), content, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	for _, scheme := range []string{"light", "dark"} {
		call(t, ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}})
		for _, width := range []int64{360, 1280, 1920} {
			run(t, ctx, chromedp.EmulateViewport(width, 1000), chromedp.Evaluate[chromedp.Void](`window.scrollTo(0, 0)`))
			save(fmt.Sprintf("%s-%s-%d.png", name, scheme, width), get(t, ctx, chromedp.CaptureScreenshot()))
			save(fmt.Sprintf("%s-%s-%d-full.png", name, scheme, width), get(t, ctx, chromedp.FullScreenshot(100)))
		}
	}
	call(t, ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Features: nil})
	for paper, size := range map[string]chromedp.PaperSize{"a4": chromedp.PaperA4, "letter": chromedp.PaperLetter} {
		pdf := get(t, ctx, chromedp.PrintToPDF(chromedp.PDFPaper(size)))
		save(name+"-"+paper+".pdf", pdf)
	}
}
