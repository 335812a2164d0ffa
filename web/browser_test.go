package web

import (
	"context"
	"fmt"
	"net/http/httptest"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/cdproto/input"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/web/webtest"
)

// serve runs the pages and the invented API on a real listener.
func serve(t *testing.T, f *fake) string {
	t.Helper()
	e := newSite(t, f)
	f.api(e)
	srv := httptest.NewServer(e)
	t.Cleanup(func() {
		srv.CloseClientConnections() // event streams do not end by themselves
		srv.Close()
	})
	return srv.URL
}

// until waits for a condition in the page.
func until(t *testing.T, ctx context.Context, condition string) {
	t.Helper()
	webtest.Until(t, ctx, 10*time.Second, condition)
}

const drawn = `document.querySelector(".veil")?.hidden === true`

func TestInBrowser(t *testing.T) {
	ctx := webtest.Browser(t)
	f := newFake(96)
	for _, file := range []string{"a.toml", "b.toml", "b.toml", "c.toml"} {
		f.unusable = append(f.unusable, gin.H{"file": file, "words": "target_lufs: 0 is not between -40 and -8"})
	}
	url := serve(t, f)
	webtest.Do(t, ctx, chromedp.EmulateViewport(1280, 980))
	told := webtest.Complaints(t, ctx)

	t.Run("maths", func(t *testing.T) { testMaths(t, ctx, url) })
	t.Run("every page without complaint", func(t *testing.T) {
		for _, path := range []string{"/", "/shelves/1", "/recordings", "/recordings/18", "/recordings/42", "/runs", "/runs/12"} {
			webtest.Do(t, ctx, chromedp.Navigate(url+path))
			until(t, ctx, `document.readyState === "complete"`)
			if wide := webtest.Eval[int](t, ctx, `document.documentElement.scrollWidth - innerWidth`); wide > 0 {
				t.Errorf("%s is %d px wider than the window", path, wide)
			}
		}
		for _, c := range told() {
			if !strings.Contains(c, "/favicon.ico") {
				t.Error(c)
			}
		}
	})
	t.Run("chart", func(t *testing.T) { testChart(t, ctx, url) })
	t.Run("a run is started", func(t *testing.T) {
		webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
		until(t, ctx, `!document.querySelector("[data-component=newrun]").disabled`)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=newrun]").click()`)
		until(t, ctx, `document.querySelectorAll("dialog[open] input[name=profile]").length === 6`)
		testProfiles(t, ctx)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] button[type=submit]").click()`)
		until(t, ctx, `location.pathname === "/runs/12"`)
	})
	t.Run("replacing takes a second step", func(t *testing.T) { testReplacing(t, ctx, url, f) })
	t.Run("tags", func(t *testing.T) { testTags(t, ctx, url, f) })
	t.Run("all originals are brought back", func(t *testing.T) { testRestoreAll(t, ctx) })
	t.Run("measuring asks how a single channel counts where it matters", func(t *testing.T) {
		for _, c := range []struct {
			rule audio.MonoRule
			asks bool
		}{{audio.OneChannel, false}, {audio.TwoLoudspeakers, true}} {
			f := newFake(10)
			f.profiles = f.profiles[:3]
			f.profiles[1].Mono = c.rule
			webtest.Do(t, ctx, chromedp.Navigate(serve(t, f)+"/"))
			until(t, ctx, `document.querySelector("[data-component=newrun]")?.disabled === false`)
			webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=newrun]").click()`)
			until(t, ctx, `document.querySelectorAll("dialog[open] input[name=profile]").length === 3`)
			webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [value=measure]").click()`)
			if got := webtest.Eval[bool](t, ctx, `!!document.querySelector("dialog[open] [data-part=single]").offsetParent`); got != c.asks {
				t.Errorf("with a second profile that counts %s: asks %v, want %v", c.rule, got, c.asks)
			}
		}
	})
	t.Run("an original is brought back", func(t *testing.T) { testRestore(t, ctx) })
	t.Run("timeline and player", func(t *testing.T) {
		webtest.Do(t, ctx, chromedp.Navigate(url+"/recordings/18"))
		until(t, ctx, `!!document.querySelector(".uplot canvas") && !document.querySelector(".player-row").hidden`)
		if got := webtest.Eval[string](t, ctx, `document.querySelector("[data-part=percent]").textContent`); got != "20 %" {
			t.Errorf("the player starts at %s", got)
		}
		place := `parseFloat(document.querySelector("[data-part=time]").textContent.slice(2))`
		webtest.Do(t, ctx, chromedp.Click(chromedp.CSS("[data-part=play]"))) // a real click: browsers let no script start sound
		until(t, ctx, place+` >= 0.4`)
		webtest.Do(t, ctx, chromedp.Click(chromedp.CSS("[data-version=after]")))
		if at := webtest.Eval[float64](t, ctx, place); at < 0.4 {
			t.Errorf("switching went back to %.1f s", at)
		}
		webtest.Do(t, ctx, chromedp.Click(chromedp.CSS("[data-part=play]")))
		until(t, ctx, `document.querySelector("[data-part=play]").textContent === "Listen"`)
		testMarks(t, ctx)
		testDoubts(t, ctx, url)
		if !webtest.Eval[bool](t, ctx, `document.querySelector("[data-version=after]").getAttribute("aria-pressed") === "true" && document.querySelector("[data-version=before]").getAttribute("aria-pressed") === "false"`) {
			t.Error("the after version is not chosen")
		}
	})
	t.Run("theme is kept", func(t *testing.T) {
		ground := `getComputedStyle(document.documentElement).backgroundColor`
		light := webtest.Eval[string](t, ctx, ground)
		webtest.Eval[chromedp.Void](t, ctx, `(document.querySelector(".theme").click(), document.querySelector(".theme").click())`)
		if dark := webtest.Eval[string](t, ctx, ground); dark == light {
			t.Error("the dark theme looks like the light one")
		}
		webtest.Do(t, ctx, chromedp.Reload())
		if webtest.Eval[string](t, ctx, `document.documentElement.dataset.theme`) != "dark" {
			t.Error("the theme was forgotten")
		}
		webtest.Eval[chromedp.Void](t, ctx, `localStorage.clear()`)
	})
	t.Run("phone", func(t *testing.T) {
		webtest.Do(t, ctx, chromedp.EmulateViewport(390, 844, chromedp.EmulateMobile))
		for _, path := range []string{"/", "/recordings", "/recordings/18", "/recordings/3", "/runs", "/runs/12"} {
			webtest.Do(t, ctx, chromedp.Navigate(url+path))
			if wide := webtest.Eval[int](t, ctx, `document.documentElement.scrollWidth - 390`); wide > 0 {
				t.Errorf("%s is %d px wider than a phone", path, wide)
			}
		}
	})
	t.Run("the API fails", func(t *testing.T) {
		f.apiDown.Store(true)
		webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
		until(t, ctx, `document.querySelector("[data-part=state]").textContent === "The database is being copied. Try again in a minute."`)
		f.apiDown.Store(false)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector(".veil [data-part=again]").click()`)
		until(t, ctx, drawn)
	})
}

// testMarks looks under the curves: what is heard at a moment, and the faults and doubts at their places. Of the five
// faults on the page one lies at the very start, two within a second of each other, and one concerns the whole
// recording; of the three doubts one is the first of those two faults again, and one concerns the whole.
func testMarks(t *testing.T, ctx context.Context) {
	reads := `document.querySelector(".reads")`
	point := func(share float64) string {
		return fmt.Sprintf(`(() => { const over = document.querySelector(".u-over"); const { left, top, width } = over.getBoundingClientRect();
			over.dispatchEvent(new MouseEvent("mousemove", { clientX: left + %g * width, clientY: top + 9, bubbles: true })); return 0; })()`, share)
	}
	for share, heard := range map[float64]string{0.02: "speech", 0.14: "pause", 0.5: "no speech"} {
		webtest.Eval[int](t, ctx, point(share))
		until(t, ctx, fmt.Sprintf(`/ LUFS, [+−]?\d+\.\d dB, %s$/.test(%s.textContent)`, heard, reads))
	}
	if n := webtest.Eval[int](t, ctx, `document.querySelectorAll(".fault-mark").length`); n != 4 {
		t.Fatalf("%d marks, want 4", n)
	}
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector(".fault-mark.is-many").focus()`)
	until(t, ctx, reads+`.textContent === "1:23.2: clipped 214 times, first at 1:23.2\n1:24.1: the sound drops out for 50 ms at 1:24.1" && !`+reads+`.hidden`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector(".fault-mark.is-many").blur()`)
	until(t, ctx, reads+`.hidden`)
	webtest.Do(t, ctx, chromedp.Click(chromedp.CSS(".fault-mark:last-child")))
	until(t, ctx, `document.querySelector("[data-part=time]").textContent.startsWith("0:02.0")`) // the end of the sound there is
}

// testDoubts goes to the moments to listen to: from the list of doubts, from a mark, and from a link of another page.
// What is heard is the copy, as quietly as the player starts.
func testDoubts(t *testing.T, ctx context.Context, url string) {
	webtest.Do(t, ctx, chromedp.Navigate(url+"/recordings?state=held"))
	webtest.Do(t, ctx, chromedp.Click(chromedp.CSS(`.why a`)))
	heard := `document.querySelector("[data-version=after]")?.getAttribute("aria-pressed") === "true"`
	until(t, ctx, `location.pathname === "/recordings/18" && `+heard)
	until(t, ctx, `document.querySelector("[data-part=time]").textContent.startsWith("1:22.2")`) // a second early
	until(t, ctx, `!!document.querySelector(".timeline-ride canvas")`)
	if got := webtest.Eval[string](t, ctx, `document.querySelector("[data-part=percent]").textContent`); got != "20 %" {
		t.Errorf("the player starts at %s", got)
	}
	ink := webtest.Eval[int](t, ctx, `(() => { const c = document.querySelector(".timeline-ride canvas"); const d = c.getContext("2d").getImageData(0, 0, c.width, c.height).data; let n = 0; for (let i = 3; i < d.length; i += 4) n += d[i] > 0; return n; })()`)
	if ink < 1500 {
		t.Errorf("only %d pixels of the ride are drawn", ink)
	}
	// The lines of marks go through it: there are pixels in the colour of doubts, which the gain is not drawn in.
	until(t, ctx, `(() => { const c = document.querySelector(".timeline-ride canvas"); const d = c.getContext("2d").getImageData(0, 0, c.width, c.height).data;
		let n = 0; for (let i = 0; i < d.length; i += 4) if (d[i + 3] > 200 && d[i] > 2 * d[i + 1] && d[i] > d[i + 2] + 30) n++; return n >= 60; })()`)
	if !webtest.Eval[bool](t, ctx, `document.querySelector(".timeline-key").compareDocumentPosition(document.querySelector(".timeline-ride")) === Node.DOCUMENT_POSITION_FOLLOWING`) {
		t.Error("the key of the band is not directly under it")
	}
	// Both charts show the same times.
	left := `document.querySelectorAll(".u-over")`
	if off := webtest.Eval[float64](t, ctx, `(([a, b]) => Math.max(Math.abs(a.left - b.left), Math.abs(a.right - b.right)))([...`+left+`].map((o) => o.getBoundingClientRect()))`); off > 0.5 {
		t.Errorf("the ride is %g px out of step with the chart above", off)
	}
	// A drag looks closer at both, and a button shows the whole again.
	picture := `document.querySelector(".timeline-ride canvas").toDataURL()`
	whole := webtest.Eval[string](t, ctx, picture)
	place := webtest.Eval[[]float64](t, ctx, `(({ left, top }) => [left, top])(document.querySelector(".u-over").getBoundingClientRect())`)
	held := func(p *input.DispatchMouseEventParams) { p.Buttons = 1 }
	for _, step := range []struct {
		what input.DispatchMouseEventType
		x    float64
	}{{input.DispatchMouseEventTypeMouseMoved, 300}, {chromedp.MousePressed, 300}, {input.DispatchMouseEventTypeMouseMoved, 400},
		{input.DispatchMouseEventTypeMouseMoved, 500}, {chromedp.MouseReleased, 500}} {
		webtest.Do(t, ctx, chromedp.MouseEvent(step.what, place[0]+step.x, place[1]+90, chromedp.ButtonLeft, chromedp.ClickCount(1), held))
	}
	until(t, ctx, `!document.querySelector("[data-part=whole]").hidden`)
	if webtest.Eval[string](t, ctx, picture) == whole {
		t.Error("the ride does not follow a closer look")
	}
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-part=whole]").click()`)
	until(t, ctx, `document.querySelector("[data-part=whole]").hidden`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-version=before]").click()`)
	webtest.Do(t, ctx, chromedp.Click(chromedp.CSS(`.doubts li:nth-child(3) button`))) // throughout: from the start
	until(t, ctx, heard+` && document.querySelector("[data-part=play]").textContent === "Pause"`)
	until(t, ctx, `document.querySelector("[data-part=play]").textContent === "Listen"`) // the sound there is ends
	webtest.Do(t, ctx, chromedp.Navigate(url+"/recordings/17"))
	until(t, ctx, `!!document.querySelector(".uplot canvas")`)
	if !webtest.Eval[bool](t, ctx, `document.querySelector("[data-part=ride]").hidden`) {
		t.Error("a gain that stood still is drawn as a ride")
	}
	webtest.Do(t, ctx, chromedp.Navigate(url+"/recordings/18"))
	until(t, ctx, `!!document.querySelector(".uplot canvas") && !document.querySelector(".player-row").hidden`)
	webtest.Do(t, ctx, chromedp.Click(chromedp.CSS("[data-version=after]")))
}

func testRestore(t *testing.T, ctx context.Context) {
	f := newReplaced(40)
	webtest.Do(t, ctx, chromedp.Navigate(serve(t, f)+"/recordings/2"))
	until(t, ctx, `document.querySelector("[data-component=restore]")?.disabled === false`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=restore]").click()`)
	f.apiDown.Store(true)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [type=submit]").click()`)
	until(t, ctx, `document.querySelector("dialog[open] .says").textContent === "The file was changed since it was levelled."`)
	f.apiDown.Store(false)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [type=submit]").click()`)
	until(t, ctx, `!!document.querySelector(".lede")?.textContent.includes("The original is back in its place") && !document.querySelector("[data-component=restore]")`)
}

// testMaths runs the chart's pure functions in the engine that will run them.
func testMaths(t *testing.T, ctx context.Context, url string) {
	webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
	base := webtest.Eval[string](t, ctx, `document.querySelector("script[type=module]").src.replace("app.js", "")`)
	call := func(module, body string) string {
		return fmt.Sprintf(`import(%q).then((m) => { %s })`, base+module, body)
	}
	// Every place is taken once, in order, by bars of almost the same size.
	for _, c := range [][3]int{{0, 10, 300}, {0, 96, 300}, {0, 10000, 117}, {0, 100000, 117}, {40, 49, 4}, {7, 8, 1}, {3, 3, 5}} {
		got := webtest.Eval[[]int](t, ctx, call("components/spine/maths.js", fmt.Sprintf(`return [...m.slots(%d, %d, %d)]`, c[0], c[1], c[2])))
		if got[0] != c[0] || got[len(got)-1] != c[1] || len(got)-1 != min(c[2], c[1]-c[0]) {
			t.Errorf("slots(%v) runs from %d to %d in %d bars", c, got[0], got[len(got)-1], len(got)-1)
		}
		for i := 1; i < len(got); i++ {
			if size, even := got[i]-got[i-1], (c[1]-c[0])/(len(got)-1); size < even || size > even+1 {
				t.Errorf("slots(%v): bar %d holds %d, the others about %d", c, i, size, even)
			}
		}
	}
	// numpy.quantile([1, 2, 4, 8], [0, .1, .5, .9, 1]) = 1, 1.3, 3, 6.8, 8
	q := webtest.Eval[[]float64](t, ctx, call("components/spine/maths.js", `return [0, 0.1, 0.5, 0.9, 1].map((q) => m.quantile([1, 2, 4, 8], q))`))
	for i, want := range []float64{1, 1.3, 3, 6.8, 8} {
		if d := q[i] - want; d > 1e-9 || d < -1e-9 {
			t.Errorf("quantile %d is %g, want %g", i, q[i], want)
		}
	}
	for what, body := range map[string]string{
		"one recording keeps its own figures": `const f = (...v) => Float32Array.of(...v); const s = m.spine({ lufs: f(-20), p10: f(-30), p95: f(-15), peak: f(-1) }, [0], 0, 1); return s.count === 1 && s.foot === -30 && s.head === -15 && s.low === -20 && s.high === -20 && s.peak === -1`,
		"what is not defined is left out":     `const f = (...v) => Float32Array.of(...v); const s = m.spine({ lufs: f(NaN, -20), p10: f(NaN, -30), p95: f(NaN, -15), peak: f(NaN, NaN) }, [0, 1], 0, 2); return s.count === 1 && s.middle === -20 && Number.isNaN(s.peak)`,
		"the scale is whole tens":             `const a = m.axis(Float32Array.of(-47, -30), 0.8); return a.low === -50 && a.high > 0.8 && a.ticks.join() === "0,-10,-20,-30,-40,-50"`,
		"the scale stops at −70":              `return m.axis(Float32Array.of(-90, -89), 0).low === -70`,
		"no figures, still a scale":           `const a = m.axis(new Float32Array(), NaN); return a.low === -40 && a.high > 0`,
		"zoom stays inside":                   `const v = m.zoomed({ from: 0, to: 100 }, 100, 0.5, 1); const w = m.zoomed(v, 100, 8, 0.5); const p = m.panned(v, 100, 500); return v.from === 50 && v.to === 100 && w.from === 0 && w.to === 100 && p.to === 100`,
		"zoom never passes the least":         `const v = m.zoomed({ from: 0, to: 9 }, 1000, 0.01, 0.5); return v.to - v.from === 8`,
		"within counts the edge":              `return m.within(Float32Array.of(-18.3, -17.7, -18.31, -18), -18, 0.3) === 3`,
	} {
		if !webtest.Eval[bool](t, ctx, call("components/spine/maths.js", body)) {
			t.Errorf("not so: %s", what)
		}
	}
	for what, body := range map[string]string{
		"orders are permutations": `const s = new m.Shelf({ target_lufs: -18, columns: ["id", "path", "state", "before_lufs", "before_p10", "before_p95", "before_peak", "after_lufs", "after_p10", "after_p95", "after_peak"],
			rows: [[5, "b/x.wav", "done", -20, -30, -10, -1, -18, -20, -15, -1], [6, "a/y.wav", "", null, null, null, null, null, null, null, null], [7, "a/b.wav", "held", -30, -31, -29, -3, null, null, null, null]] });
			return ["folder", "name", "loudness", "range"].map((by) => [...s.order(by)].join("")).join() === "210,201,201,201"`,
	} {
		if !webtest.Eval[bool](t, ctx, call("components/spine/data.js", body)) {
			t.Errorf("not so: %s", what)
		}
	}
	for what, body := range map[string]string{
		"a true minus":          `return m.number(-18) === "−18.0" && m.number(-0.01) === "0.0" && m.number(null) === "–"`,
		"places in a recording": `return m.clock(3.2) === "0:03.2" && m.clock(3723.44) === "1:02:03.4" && m.clock(59.96) === "1:00.0" && m.clock(65, 0) === "1:05"`,
	} {
		if !webtest.Eval[bool](t, ctx, call("figures.js", body)) {
			t.Errorf("not so: %s", what)
		}
	}
	if !webtest.Eval[bool](t, ctx, call("components/timeline/curves.js", `const c = m.columns({ step_s: 0.1, before: { short_term: [-20, null], momentary: [-19, null], peak: [-3, null] }, after: null });
		const [low, high] = m.extent(c, false); return c.x.length === 2 && c.before.shortTerm[1] === null && !c.hasAfter && low === -30 && high <= 3`)) {
		t.Error("silence in a timeline is not a gap")
	}
	if !webtest.Eval[bool](t, ctx, call("components/timeline/curves.js", `const n = 40, late = new Array(n).fill(-20); late[0] = -69; late[1] = -4;
		const ends = (short_term) => m.extent(m.columns({ step_s: 0.1, before: { short_term, momentary: [], peak: [] }, after: null }), false).join();
		return ends(late) === "-30,0" && ends(late.slice(0, 20)) === "-70,0" && ends([...late, -51]) === "-60,0"`)) {
		t.Error("the first three seconds set the foot of the scale, or not its head")
	}
	for what, body := range map[string]string{
		"what counts a single channel so is named": `const p = [{ name: "a", mono: "x" }, { name: "untouched", mono: "y" }, { name: "b", mono: "y" }, { name: "c", mono: "z" }];
			return m.counting(p, "x") === "a" && m.counting(p, "y") === "untouched" && m.counting(p, "z") === "c" && m.counting(p, "w") === "a" && m.counting([], "x") === undefined`,
		"each unusable file is named once": `const p = (...files) => m.unusable(files.map((file) => ({ file, words: "" }))); return p() === "" && p("a.toml", "a.toml") === "1 file in the profiles folder cannot be used: a.toml." &&
			p("1.toml", "2.toml", "3.toml", "4.toml", "5.toml", "6.TOML", "7.toml") === "7 files in the profiles folder cannot be used: 1.toml, 2.toml, 3.toml, 4.toml, 5.toml, and 2 more." && p("/srv/profiles") === "The profiles folder cannot be read."`,
	} {
		if !webtest.Eval[bool](t, ctx, call("components/newrun/newrun.js", body)) {
			t.Errorf("not so: %s", what)
		}
	}
	for module, claims := range map[string]map[string]string{
		"band": {
			"steps of a kind are one stretch": `return JSON.stringify(m.stretches({ active: [true, true, false, true, true], speech: [50, 90, 0, 49, 50] }, 1)) ===
				JSON.stringify([{ from: 0, to: 2, speech: true }, { from: 3, to: 4, speech: false }, { from: 4, to: 5, speech: true }])`,
			"what was not looked for is not silence": `return m.stretches({ active: null, speech: null }, 1) === null && m.stretches(null, 1) === null`,
			"a pause is what is left":                `const b = m.stretches({ active: [true, false, true], speech: [99, 0, 0] }, 1); return [1, 2, 3].map((s) => m.heardAt(b, s)).join() === "speech,pause,no speech"`,
		},
		"ride": {
			"a gain is the ride and what is steady": `const r = m.rideOf({ gain_db: [-1, 2.5], steady_db: 4 }, 0.1); return [...r.db].join() === "3,6.5" && [...r.x].join() === "0,0.1"`,
			"no ride, no line":                      `return m.rideOf(null, 0.1) === null && m.rideOf({ gain_db: [], steady_db: 4 }, 0.1) === null`,
			"the scale holds 0 and is never tiny":   `const [l, h] = m.gainExtent([3, 3.1]); const [a, b] = m.gainExtent([-8, 8]); return l <= 0 && h >= 3.1 && h - l >= 6 && a === -9 && b === 9`,
			"a gain has its sign":                   `return m.signed(4.25) === "+4.3" && m.signed(-4) === "−4.0" && m.signed(0.01) === "0.0" && m.signed(5, 0) === "+5"`,
		},
		"faults": {
			"marks that would cover each other are one": `return m.clusters([{ at: 1 }, { at: 2 }, { at: 9 }], ({ at }) => 10 * at).map(({ x, faults }) => [x, faults.length]).join(";") === "10,2;90,1"`,
		},
	} {
		for what, body := range claims {
			if !webtest.Eval[bool](t, ctx, call("components/timeline/"+module+".js", body)) {
				t.Errorf("not so: %s", what)
			}
		}
	}
}

func testChart(t *testing.T, ctx context.Context, url string) {
	webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
	until(t, ctx, drawn)
	ink := webtest.Eval[int](t, ctx, `(() => { const c = document.querySelector("canvas[data-part=before]"); const d = c.getContext("2d").getImageData(0, 0, c.width, c.height).data; let n = 0; for (let i = 3; i < d.length; i += 4) n += d[i] > 0; return n; })()`)
	if ink < 5000 {
		t.Errorf("only %d pixels of the chart are drawn", ink)
	}
	told := webtest.Eval[string](t, ctx, `document.querySelector("[data-part=told-after]").textContent`)
	if !strings.HasSuffix(told, "within 0.3 LU of the target, 3 held for a listen, 1 failed") {
		t.Errorf("the after panel says %q", told)
	}
	// The keyboard walks, tells, zooms and opens.
	webtest.Do(t, ctx, chromedp.Focus(chromedp.CSS(".spines-sheet")), chromedp.KeyEvent(kb.ArrowRight), chromedp.KeyEvent(kb.ArrowRight))
	if said := webtest.Eval[string](t, ctx, `document.querySelector("[data-part=live]").textContent`); !strings.Contains(said, "Spine 2 of 96") || !strings.Contains(said, "LUFS") {
		t.Errorf("two steps to the right say %q", said)
	}
	webtest.Do(t, ctx, chromedp.KeyEvent("+"))
	until(t, ctx, `document.querySelector("[data-part=window]").textContent.endsWith("of 96")`)
	webtest.Do(t, ctx, chromedp.KeyEvent(kb.Escape), chromedp.KeyEvent(kb.Home))
	until(t, ctx, `document.querySelector("[data-part=live]").textContent.includes("Spine 1 of 96")`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-sort=loudness]").click()`)
	webtest.Do(t, ctx, chromedp.Focus(chromedp.CSS(".spines-sheet")), chromedp.KeyEvent(kb.Home), chromedp.KeyEvent(kb.Enter))
	until(t, ctx, `location.pathname.startsWith("/recordings/")`)
}
