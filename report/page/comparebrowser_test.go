package page_test

import (
	"context"
	"fmt"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/input"
	"github.com/chromedp/chromedp"
	"github.com/stretchr/testify/require"

	"gatesill/report/internal/invented"
)

func TestComparisonInBrowser(t *testing.T) {
	b := browser(t)
	lot := compared(two[0], two[1], invented.Against{Margin: 0.05, Paired: true})
	lot.Trend = invented.Trend(25)
	s := serve(t, lot)

	// point moves the pointer to an element of a picture and gives what the picture
	// then says.
	point := func(t *testing.T, ctx context.Context, selector string) string {
		at := js[[]float64](t, ctx, fmt.Sprintf(`(() => { const p = document.querySelector('%s');
			p.scrollIntoView({block: "center", behavior: "instant"});
			const r = p.getBoundingClientRect(); return [r.x + r.width / 2, r.y + r.height / 2]; })()`, selector))
		require.NoError(t, chromedp.Do(ctx, chromedp.MouseEvent(input.DispatchMouseEventTypeMouseMoved, at[0], at[1]), chromedp.Sleep(200*time.Millisecond)))
		return js[string](t, ctx, fmt.Sprintf(`document.querySelector('%s').closest("figure").querySelector(".readout").innerText`, selector))
	}

	t.Run("nothing is fetched and the policy is kept", func(t *testing.T) {
		fresh := serve(t, lot)
		ctx := tab(t, b, fresh.URL, watchPolicy)
		require.Equal(t, "", js[string](t, ctx, `broken.join("; ")`), "the page breaks its own policy")
		fresh.mu.Lock()
		defer fresh.mu.Unlock()
		require.Equal(t, []string{"/"}, fresh.asked, "the page asked for more than itself")
	})

	t.Run("pointing at a mark names it", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		// A device of this lot stands out with its row.
		name := js[string](t, ctx, `(() => { const p = document.querySelectorAll("#compare-steps .mthis[data-d]")[9]; p.id = "aim"; return document.querySelector('tr[data-d="' + p.dataset.d + '"]').cells[0].innerText; })()`)
		require.Contains(t, point(t, ctx, "#aim"), name)
		require.Equal(t, float64(1), js[float64](t, ctx, `document.querySelectorAll("#device-table tr.on").length`))
		// A device of the reference has no row: the mark says who it is.
		text := point(t, ctx, "#compare-steps path.mthat:nth-of-type(20)")
		require.Regexp(t, `^D\d\d of 2611: 3\.\d+ V`, text)
		require.Equal(t, float64(0), js[float64](t, ctx, `document.querySelectorAll("#device-table tr.on").length`), "the row of another device stands out")
		require.Regexp(t, `^at 100 µA: .* band .* n = 35 and 31$`, point(t, ctx, "#compare-shift .mthis"))
		require.Regexp(t, `^2600: 3\.4\d+ ± 0\.0060 V, n = 20`, point(t, ctx, "#run-of-lots .mthis"))
		// Elsewhere the picture says again what it is for.
		require.NoError(t, chromedp.Do(ctx, chromedp.MouseEvent(input.DispatchMouseEventTypeMouseMoved, 2, 2), chromedp.Sleep(200*time.Millisecond)))
		require.Equal(t, "Point at a mark to read its numbers.", js[string](t, ctx, `document.querySelector("#run-of-lots").closest("figure").querySelector(".readout").innerText`))
	})

	t.Run("the two switches are two", func(t *testing.T) {
		ctx := tab(t, b, s.URL, noScripts)
		visible := func() string {
			return js[string](t, ctx, `[...document.querySelectorAll(".pic")].filter(p => getComputedStyle(p).display !== "none").map(p => p.querySelector("svg").id).join(" ")`)
		}
		require.Equal(t, "both-square-root curves-linear", visible())
		require.NoError(t, chromedp.Do(ctx, chromedp.Click(chromedp.CSS(`label[for="two-logarithmic"]`))))
		require.Equal(t, "both-logarithmic curves-linear", visible())
	})

	t.Run("dark", func(t *testing.T) {
		ctx := tab(t, b, s.URL)
		colours := func() []string {
			return js[[]string](t, ctx, `[["#compare-steps .this", "stroke"], ["#compare-steps .that", "stroke"], ["#compare-shift .fthis", "fill"], [".verdict", "backgroundColor"]].map(([q, p]) => getComputedStyle(document.querySelector(q))[p])`)
		}
		require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "light")))
		light := colours()
		require.NotEqual(t, light[0], light[1], "both lots in one colour")
		require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "dark")))
		dark := colours()
		require.NotEqual(t, dark[0], dark[1], "both lots in one colour")
		for i := range light {
			require.NotEqual(t, light[i], dark[i])
		}
	})

	// Nothing that does not scroll by itself may be wider than the page.
	wide := `[...document.querySelectorAll("#compared *, #trend *")].filter(e => !e.closest(".scroll") && !e.closest("svg") && e.getBoundingClientRect().right > document.documentElement.clientWidth + 1).map(e => e.tagName + "." + e.className).join(" ")`
	for _, size := range [][2]int64{{1366, 768}, {1024, 768}, {360, 780}} {
		t.Run(fmt.Sprintf("fits %d x %d", size[0], size[1]), func(t *testing.T) {
			ctx := tab(t, b, s.URL, chromedp.EmulateViewport(size[0], size[1]))
			require.LessOrEqual(t, js[float64](t, ctx, `document.documentElement.scrollWidth`), float64(size[0]), "the page as a whole scrolls sideways")
			require.Empty(t, js[string](t, ctx, wide))
			if size[0] >= 1024 { // no table or picture of the section needs to be scrolled
				require.Empty(t, js[string](t, ctx, `[...document.querySelectorAll("#compared .scroll, #trend .scroll")].filter(e => e.offsetParent && e.scrollWidth > e.clientWidth + 1).map(e => e.getAttribute("aria-label")).join("; ")`))
			}
		})
	}

	t.Run("prints", func(t *testing.T) {
		// The width of the printed area of an A4 page with the page's margins: 182 mm.
		ctx := tab(t, b, s.URL, chromedp.EmulateViewport(688, 900))
		require.NoError(t, chromedp.Do(ctx, func(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
			_, err := chromedp.Call(ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Media: "print"})
			return chromedp.Void{}, err
		}))
		require.Empty(t, js[string](t, ctx, `[...document.querySelectorAll("#compared *, #trend *")].filter(e => !e.closest("svg") && e.offsetParent && e.getBoundingClientRect().right > 689).map(e => e.tagName + "." + e.className).join(" ")`), "wider than the paper")
		require.Equal(t, "rgb(0, 0, 0)", js[string](t, ctx, `getComputedStyle(document.querySelector("#compare-steps .that")).stroke`))
		require.Equal(t, 1.0, js[float64](t, ctx, `[...document.querySelectorAll("#compared .pic")].filter(p => getComputedStyle(p).display !== "none").length`))
		require.Equal(t, "avoid", js[string](t, ctx, `getComputedStyle(document.querySelector(".verdict")).breakInside`))
	})
}
