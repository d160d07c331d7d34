package page_test

import (
	"bytes"
	"context"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/input"
	"github.com/chromedp/cdproto/page"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
	"github.com/stretchr/testify/require"

	"gatesill/report"
	"gatesill/report/internal/invented"
	reportpage "gatesill/report/page"
)

// browser starts a browser for the tests of the page, or skips them in plain
// words where there is none.
func browser(t *testing.T) context.Context {
	t.Helper()
	if testing.Short() {
		t.Skip("browser tests are left out of a short run")
	}
	path := ""
	for _, name := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if p, err := exec.LookPath(name); err == nil {
			path = p
			break
		}
	}
	if path == "" {
		t.Skip("no chromium found: the page was not looked at in a browser (Debian: apt install chromium)")
	}
	ctx, cancel := chromedp.NewExecAllocator(context.Background(),
		append(chromedp.DefaultExecAllocatorOptions[:],
			chromedp.ExecPath(path), chromedp.NoSandbox, chromedp.DisableGPU, chromedp.NoFirstRun,
			chromedp.UserDataDir(t.TempDir()), chromedp.WindowSize(1280, 1000),
			chromedp.Flag("disable-background-networking", true), chromedp.Flag("disable-component-update", true),
			chromedp.Flag("disable-sync", true))...)
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewContext(ctx)
	t.Cleanup(cancel)
	require.NoError(t, chromedp.Do(ctx))
	return ctx
}

// site serves one page and remembers what was asked of it.
type site struct {
	*httptest.Server
	mu    sync.Mutex
	asked []string
}

func serve(t *testing.T, s report.Sheet) *site {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, reportpage.Write(&b, s))
	return servePage(t, b.Bytes())
}

// servePage serves these bytes.
func servePage(t *testing.T, b []byte) *site {
	t.Helper()
	st := &site{}
	st.Server = httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		st.mu.Lock()
		st.asked = append(st.asked, r.URL.Path)
		st.mu.Unlock()
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		w.Write(b)
	}))
	t.Cleanup(st.Close)
	return st
}

// tab opens a page in a tab of its own.
func tab(t *testing.T, browser context.Context, url string, first ...chromedp.Action[chromedp.Void]) context.Context {
	t.Helper()
	ctx, cancel := chromedp.NewContext(browser)
	t.Cleanup(cancel)
	ctx, stop := context.WithTimeout(ctx, 60*time.Second)
	t.Cleanup(stop)
	require.NoError(t, chromedp.Do(ctx, append(first, chromedp.Navigate(url))...))
	return ctx
}

func js[T any](t *testing.T, ctx context.Context, script string) T {
	t.Helper()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[T](script))
	require.NoError(t, err, script)
	return v
}

func media(features ...string) chromedp.Action[chromedp.Void] {
	return func(ctx context.Context, target *chromedp.Target) (chromedp.Void, error) {
		p := emulation.SetEmulatedMediaParams{}
		for i := 0; i+1 < len(features); i += 2 {
			p.Features = append(p.Features, &emulation.MediaFeature{Name: features[i], Value: features[i+1]})
		}
		_, err := chromedp.Call(ctx, emulation.SetEmulatedMedia, p)
		return chromedp.Void{}, err
	}
}

func noScripts(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
	_, err := chromedp.Call(ctx, emulation.SetScriptExecutionDisabled, emulation.SetScriptExecutionDisabledParams{Value: true})
	return chromedp.Void{}, err
}

// watchPolicy makes a page gather what its policy forbade in the list broken.
func watchPolicy(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
	_, err := chromedp.Call(ctx, page.AddScriptToEvaluateOnNewDocument, page.AddScriptToEvaluateOnNewDocumentParams{
		Source: `window.broken = []; addEventListener("securitypolicyviolation", (e) => broken.push(e.violatedDirective + " " + e.blockedURI));`,
	})
	return chromedp.Void{}, err
}

func TestInBrowser(t *testing.T) {
	b := browser(t)
	lot := invented.Lot(invented.Options{Devices: 40, Points: 30, Seed: 5})
	flagged := ""
	for _, v := range lot.Spread.Devices {
		if v.Flagged && v.Reasons[0].Code == "off-family-threshold" {
			flagged = v.Name
		}
	}
	require.NotEmpty(t, flagged)
	s := serve(t, lot)

	t.Run("nothing is fetched and the policy is kept", func(t *testing.T) {
		fresh := serve(t, lot)
		ctx := tab(t, b, fresh.URL, watchPolicy)
		require.Equal(t, "", js[string](t, ctx, `broken.join("; ")`), "the page breaks its own policy")
		fresh.mu.Lock()
		defer fresh.mu.Unlock()
		require.Equal(t, []string{"/"}, fresh.asked, "the page asked for more than itself")
		require.Equal(t, float64(0), js[float64](t, ctx, `performance.getEntriesByType("resource").filter(r => !r.name.startsWith("data:")).length`))
	})

	t.Run("the policy holds", func(t *testing.T) {
		fresh := serve(t, lot)
		ctx := tab(t, b, fresh.URL, watchPolicy)
		js[bool](t, ctx, `(() => { const s = document.createElement("script"); s.textContent = "window.ran = 1";
			const i = new Image(); i.src = "/picture.png"; document.body.append(s, i); return true; })()`)
		require.NoError(t, chromedp.Do(ctx, chromedp.Sleep(300*time.Millisecond)))
		require.True(t, js[bool](t, ctx, `window.ran === undefined`), "a script that is not the page's own ran")
		require.Len(t, js[[]string](t, ctx, `broken`), 2)
		fresh.mu.Lock()
		defer fresh.mu.Unlock()
		require.Equal(t, []string{"/"}, fresh.asked, "a picture was fetched")
	})

	t.Run("pointing at a curve names the device", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		ref := js[string](t, ctx, fmt.Sprintf(`[...document.querySelectorAll("#device-table tbody tr")].find(r => r.cells[0].innerText === %q).dataset.d`, flagged))
		at := js[[]float64](t, ctx, fmt.Sprintf(`(() => {
			const p = document.querySelector('#curves-linear [data-d="%s"]');
			p.scrollIntoView({block: "center", behavior: "instant"});
			const l = p.getTotalLength(), q = p.getPointAtLength(l * 0.8).matrixTransform(p.getScreenCTM());
			return [q.x + 3, q.y];
		})()`, ref))
		require.NoError(t, chromedp.Do(ctx, chromedp.MouseEvent(input.DispatchMouseEventTypeMouseMoved, at[0], at[1]), chromedp.Sleep(200*time.Millisecond)))
		text := js[string](t, ctx, `document.querySelector(".readout").innerText`)
		require.Contains(t, text, flagged)
		require.Contains(t, text, "off family threshold")
		require.True(t, js[bool](t, ctx, fmt.Sprintf(`document.querySelector('tr[data-d="%s"]').classList.contains("on")`, ref)), "its row does not stand out")
		require.Equal(t, float64(4), js[float64](t, ctx, fmt.Sprintf(`document.querySelectorAll('svg [data-d="%s"].on').length`, ref)), "it must stand out in the four pictures")
	})

	t.Run("the arrow keys name the devices", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		js[bool](t, ctx, `(document.querySelector(".pic.axis-linear").focus(), true)`)
		var names []string
		for range 3 {
			require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent(kb.ArrowRight)))
			names = append(names, js[string](t, ctx, `document.querySelector(".readout b").innerText`))
		}
		require.Len(t, names, 3)
		require.NotEqual(t, names[0], names[1])
		require.NotEqual(t, names[1], names[2])
	})

	t.Run("without scripts", func(t *testing.T) {
		ctx := tab(t, b, s.URL, noScripts)
		visible := func() string {
			return js[string](t, ctx, `[...document.querySelectorAll(".pic")].filter(p => getComputedStyle(p).display !== "none").map(p => p.querySelector("svg").id).join(" ")`)
		}
		require.Equal(t, "curves-linear", visible())
		require.NoError(t, chromedp.Do(ctx, chromedp.Click(chromedp.CSS(`label[for="axis-logarithmic"]`))))
		require.Equal(t, "curves-logarithmic", visible())
		// By keyboard: the switch is a group of radio buttons.
		js[bool](t, ctx, `(document.getElementById("axis-logarithmic").focus(), true)`)
		require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent(kb.ArrowLeft)))
		require.Equal(t, "curves-square-root", visible())
		// Flagged curves take the focus and say who they are.
		label := js[string](t, ctx, fmt.Sprintf(`[...document.querySelectorAll("#curves-square-root [tabindex]")].map(p => p.getAttribute("aria-label")).find(l => l.startsWith(%q)) || ""`, flagged+","))
		require.Contains(t, label, "off family threshold")
		before := js[string](t, ctx, `getComputedStyle(document.querySelector("#curves-square-root [tabindex]")).strokeWidth`)
		js[bool](t, ctx, `(document.querySelector("#curves-square-root [tabindex]").focus(), true)`)
		after := js[string](t, ctx, `getComputedStyle(document.querySelector("#curves-square-root [tabindex]")).strokeWidth`)
		require.NotEqual(t, before, after, "the focus does not show")
		require.True(t, js[bool](t, ctx, `document.querySelector(".tools").hidden`), "a control that needs a script is shown")
	})

	t.Run("sorting by keyboard", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		column := func() []float64 {
			return js[[]float64](t, ctx, `(() => { const h = [...document.querySelectorAll("#device-table thead th")].findIndex(h => h.hasAttribute("data-num"));
				return [...document.querySelectorAll("#device-table tbody tr")].map(r => r.cells[h].dataset.v === undefined ? 1e9 : +r.cells[h].dataset.v); })()`)
		}
		js[bool](t, ctx, `(document.querySelector("#device-table thead th[data-num] button").focus(), true)`)
		require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent(kb.Enter)))
		require.Equal(t, "ascending", js[string](t, ctx, `document.querySelector("#device-table thead th[data-num]").getAttribute("aria-sort")`))
		up := column()
		require.IsNonDecreasing(t, up)
		require.Equal(t, 1e9, up[len(up)-1], "what has no value must stand at the end")
		require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent(kb.Enter)))
		require.Equal(t, "descending", js[string](t, ctx, `document.querySelector("#device-table thead th[data-num]").getAttribute("aria-sort")`))
		down := column()
		require.Equal(t, 1e9, down[len(down)-1], "what has no value must stand at the end")
		require.Greater(t, down[0], down[20])
		require.Equal(t, float64(1), js[float64](t, ctx, `document.querySelectorAll("[aria-sort]").length`))
	})

	t.Run("finding", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		require.NoError(t, chromedp.Do(ctx, chromedp.SendKeys(chromedp.ID("find"), strings.ToLower(flagged))))
		require.Equal(t, "1 of 40 shown", js[string](t, ctx, `document.getElementById("shown").innerText`))
		require.Contains(t, js[string](t, ctx, `document.querySelector(".readout").innerText`), flagged)
	})

	t.Run("dark", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		colours := func() []string {
			return js[[]string](t, ctx, `[getComputedStyle(document.body).backgroundColor, getComputedStyle(document.body).color,
				getComputedStyle(document.querySelector("#curves-linear .lines path")).stroke, getComputedStyle(document.querySelector("#curves-linear text")).fill]`)
		}
		require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "light")))
		light := colours()
		require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "dark")))
		dark := colours()
		for i := range light {
			require.NotEqual(t, light[i], dark[i])
		}
	})

	t.Run("prints whole", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		pdf, err := chromedp.Run(ctx, chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize()))
		require.NoError(t, err)
		require.True(t, bytes.HasPrefix(pdf, []byte("%PDF-")))
		require.NoError(t, chromedp.Do(ctx, func(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
			_, err := chromedp.Call(ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Media: "print"})
			return chromedp.Void{}, err
		}))
		require.Equal(t, "none", js[string](t, ctx, `getComputedStyle(document.querySelector("nav")).display`))
		require.Equal(t, "rgb(255, 255, 255)", js[string](t, ctx, `getComputedStyle(document.body).backgroundColor`))
		require.Equal(t, "table-header-group", js[string](t, ctx, `getComputedStyle(document.querySelector("#device-table thead")).display`))
		require.Equal(t, 1.0, js[float64](t, ctx, `Math.max(...[...document.querySelectorAll("#device-table tbody th bdi")].map(n => n.getClientRects().length && Math.round(n.getBoundingClientRect().height / parseFloat(getComputedStyle(n).lineHeight))))`), "a short name of a device is broken")
		// A button box in a head keeps the engine from repeating it on each page.
		require.Equal(t, "contents", js[string](t, ctx, `getComputedStyle(document.querySelector("#device-table thead button")).display`))
	})

	t.Run("fits a phone", func(t *testing.T) {
		ctx := tab(t, b, s.URL, chromedp.EmulateViewport(360, 780))
		require.LessOrEqual(t, js[float64](t, ctx, `document.documentElement.scrollWidth`), 360.0, "the page as a whole scrolls sideways")
		// Names of a bin have the width of the page, not one line each.
		require.Greater(t, js[float64](t, ctx, `Math.min(...[...document.querySelectorAll("#bins tbody td:last-child")].map(c => c.getBoundingClientRect().width))`), 280.0)
		require.Equal(t, 0.0, js[float64](t, ctx, `(() => { const b = document.querySelector("#bins .scroll"); return b.scrollWidth - b.clientWidth; })()`), "the table of bins scrolls sideways")
	})
}

// TestAccessibility runs axe-core over the page, light and dark, with and
// without the things that scripts add. GATESILL_AXE names the file of axe-core
// (axe.min.js); it is not part of this project.
func TestAccessibility(t *testing.T) {
	path := os.Getenv("GATESILL_AXE")
	if path == "" {
		t.Skip("GATESILL_AXE is not set: accessibility was not checked")
	}
	axe, err := os.ReadFile(path)
	require.NoError(t, err)
	b := browser(t)
	lots := map[string]report.Sheet{
		"curves":    invented.Lot(invented.Options{Devices: 30, Points: 25, Seed: 5}),
		"p-channel": invented.Lot(invented.Options{Devices: 12, Points: 25, Seed: 6, PChannel: true}),
		"spots":     invented.Lot(invented.Options{Devices: 12, Points: 1, Spots: true, Seed: 7}),
		"compared":  compared(two[0], two[1], invented.Against{Margin: 0.05, After: true, Paired: true}),
	}
	run := lots["compared"]
	run.Trend = invented.Trend(25)
	lots["compared"] = run
	for name, lot := range lots {
		for _, scheme := range []string{"light", "dark"} {
			t.Run(name+" "+scheme, func(t *testing.T) {
				s := serve(t, lot)
				ctx := tab(t, b, s.URL, func(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
					_, err := chromedp.Call(ctx, page.SetBypassCSP, page.SetBypassCSPParams{Enabled: true})
					return chromedp.Void{}, err
				}, media("prefers-color-scheme", scheme))
				js[bool](t, ctx, string(axe)+";true")
				found, err := chromedp.Run(ctx, chromedp.Evaluate[string](`axe.run(document, {runOnly: ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]}).then(r => r.violations.map(v => v.id + ": " + v.help + "\n" + v.nodes.slice(0, 4).map(n => "   " + n.html.slice(0, 160) + "  " + (n.failureSummary || "").replace(/\s+/g, " ")).join("\n")).join("\n"))`, chromedp.EvalAwaitPromise))
				require.NoError(t, err)
				require.Empty(t, found)
			})
		}
	}
}
