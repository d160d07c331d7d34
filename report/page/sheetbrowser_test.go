package page_test

import (
	"bytes"
	"context"
	"fmt"
	"regexp"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/input"
	"github.com/chromedp/chromedp"
	"github.com/stretchr/testify/require"

	"gatesill/fit/match"
	"gatesill/report/internal/invented"
)

// pagesOf counts the pages of a printed page.
func pagesOf(pdf []byte) int {
	return len(regexp.MustCompile(`/Type\s*/Page\b[^s]`).FindAll(pdf, -1))
}

func TestSheetsInBrowser(t *testing.T) {
	b := browser(t)
	clean := invented.Lot(invented.Options{Devices: 30, Points: 20, Seed: 5, Clean: true})
	many := invented.Lot(invented.Options{Devices: 100, Points: 20, Seed: 5, Clean: true})
	few := invented.Lot(invented.Options{Devices: 20, Points: 20, Seed: 5, Clean: true})
	for _, one := range []struct {
		name, page, mark, says string
		printed                int // pages on A4: one, and one more for what is handed out
	}{
		{"pairs", writeSets(t, matchedOf(t, match.Options{By: byBias(0.015), Sets: 5, Vds: 28}, few)), "#sets-axis .mthis", `^D\d\d in set \d+: 3\.\d+ V$`, 1},
		{"fours", writeSets(t, matchedOf(t, match.Options{By: byBias(0.01), Size: 4, Vds: 28}, many)), "#sets-axis .mthis", `^D\d+ in set \d+: 3\.\d+ V$`, 2},
		{"bias", writeBias(t, biasOf(t, clean, trimmed())), "#bias-draws .mthis", `^D\d\d: \d+(\.\d+)? mA$`, 2},
	} {
		s := servePage(t, []byte(one.page))
		t.Run(one.name+": nothing is fetched and the policy is kept", func(t *testing.T) {
			fresh := servePage(t, []byte(one.page))
			ctx := tab(t, b, fresh.URL, watchPolicy)
			require.Equal(t, "", js[string](t, ctx, `broken.join("; ")`), "the page breaks its own policy")
			fresh.mu.Lock()
			defer fresh.mu.Unlock()
			require.Equal(t, []string{"/"}, fresh.asked)
		})
		t.Run(one.name+": pointing at a mark names it", func(t *testing.T) {
			ctx := tab(t, b, s.URL)
			at := js[[]float64](t, ctx, fmt.Sprintf(`(() => { const p = document.querySelector('%s'); p.scrollIntoView({block: "center", behavior: "instant"});
				const r = p.getBoundingClientRect(); return [r.x + r.width / 2, r.y + r.height / 2]; })()`, one.mark))
			require.NoError(t, chromedp.Do(ctx, chromedp.MouseEvent(input.DispatchMouseEventTypeMouseMoved, at[0], at[1]), chromedp.Sleep(200*time.Millisecond)))
			require.Regexp(t, one.says, js[string](t, ctx, fmt.Sprintf(`document.querySelector('%s').closest("figure").querySelector(".readout").innerText`, one.mark)))
		})
		t.Run(one.name+": dark", func(t *testing.T) {
			ctx := tab(t, b, s.URL)
			colour := fmt.Sprintf(`[getComputedStyle(document.querySelector('%s')).fill, getComputedStyle(document.body).backgroundColor]`, one.mark)
			require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "light")))
			light := js[[]string](t, ctx, colour)
			require.NoError(t, chromedp.Do(ctx, media("prefers-color-scheme", "dark")))
			dark := js[[]string](t, ctx, colour)
			require.NotEqual(t, light[0], dark[0])
			require.NotEqual(t, light[1], dark[1])
		})
		for _, size := range [][2]int64{{1366, 768}, {1024, 768}, {360, 780}} {
			t.Run(fmt.Sprintf("%s: fits %d x %d", one.name, size[0], size[1]), func(t *testing.T) {
				ctx := tab(t, b, s.URL, chromedp.EmulateViewport(size[0], size[1]))
				require.LessOrEqual(t, js[float64](t, ctx, `document.documentElement.scrollWidth`), float64(size[0]), "the page as a whole scrolls sideways")
				require.Empty(t, js[string](t, ctx, `[...document.querySelectorAll("main *")].filter(e => !e.closest(".scroll, .drawing") && !e.closest("svg") && e.getBoundingClientRect().right > document.documentElement.clientWidth + 1).map(e => e.tagName + "." + e.className).join(" ")`))
				if size[0] >= 1024 {
					require.Empty(t, js[string](t, ctx, `[...document.querySelectorAll(".scroll")].filter(e => e.offsetParent && !e.closest("details") && e.scrollWidth > e.clientWidth + 1).map(e => e.getAttribute("aria-label")).join("; ")`))
				}
			})
		}
		t.Run(one.name+": prints", func(t *testing.T) {
			ctx := tab(t, b, s.URL)
			pdf, err := chromedp.Run(ctx, chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize()))
			require.NoError(t, err)
			require.True(t, bytes.HasPrefix(pdf, []byte("%PDF-")))
			printed := pagesOf(pdf)
			// The width of the printed area: 182 mm.
			ctx = tab(t, b, s.URL, chromedp.EmulateViewport(688, 900))
			require.NoError(t, chromedp.Do(ctx, func(ctx context.Context, _ *chromedp.Target) (chromedp.Void, error) {
				_, err := chromedp.Call(ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Media: "print"})
				return chromedp.Void{}, err
			}))
			require.Equal(t, one.printed, printed, "pages of A4; the parts of the page end at, of 994 px a page: %s", js[string](t, ctx, `[...document.querySelectorAll("main > section, main > section > *, footer")].map(e => e.tagName + " " + e.className + " " + Math.round(e.getBoundingClientRect().bottom)).join("; ")`))
			require.Empty(t, js[string](t, ctx, `[...document.querySelectorAll("main *")].filter(e => !e.closest("svg") && e.offsetParent && e.getBoundingClientRect().right > 689).map(e => e.tagName + "." + e.className + " " + e.textContent.slice(0, 20)).slice(0, 8).join("; ")`), "wider than the paper")
		})
	}
}
