//go:build !race

package command

import (
	"fmt"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"evenshelf/web/webtest"
)

// The main job as a person does it, in a real browser on the whole program: register a shelf on the first
// start, scan it, start a run, watch it end without touching anything, and look at a recording.
func TestShelfIsLevelledFromTheDashboard(t *testing.T) {
	shelf := t.TempDir()
	for i, ext := range []string{"wav", "flac", "mp3"} {
		excerpt(t, filepath.Join(shelf, "songs", fmt.Sprintf("song %d.%s", i, ext)))
	}
	write(t, filepath.Join(shelf, "letter.mp3"), "not a recording\n")
	server := startChild(t, "--data", t.TempDir())
	ctx := webtest.Browser(t)
	told := webtest.Complaints(t, ctx)
	do := func(steps ...chromedp.Action[chromedp.Void]) { t.Helper(); webtest.Do(t, ctx, steps...) }
	until := func(condition string) { t.Helper(); webtest.Until(t, ctx, time.Minute, condition) }
	click := func(css string) {
		t.Helper()
		until(fmt.Sprintf(`(e => !!e && !e.disabled)(document.querySelector(%q))`, css))
		webtest.Eval[chromedp.Void](t, ctx, fmt.Sprintf(`document.querySelector(%q).click()`, css))
	}
	says := func(text string) {
		t.Helper()
		until(fmt.Sprintf(`!!document.querySelector("main")?.innerText.includes(%q)`, text))
	}

	do(chromedp.EmulateViewport(1280, 900), chromedp.Navigate(server.url+"/"))
	until(`!document.querySelector(".newshelf [type=submit]").disabled`)
	do(chromedp.SendKeys(chromedp.CSS(".newshelf [name=name]"), "radio"), chromedp.SendKeys(chromedp.CSS(".newshelf [name=root]"), shelf))
	click(".newshelf [type=submit]")
	says("radio")
	if webtest.Eval[bool](t, ctx, `!document.querySelector("main").innerText.includes("4 recordings")`) {
		click("[data-component=scan]")
	}
	says("4 recordings")

	click("[data-component=newrun]")
	click("dialog[open] input[name=profile][value=rotation]")
	click("dialog[open] [type=submit]")
	until(`location.pathname.startsWith("/runs/")`)
	says("3 of 4 recordings done") // it gets there by the event stream alone
	says("1 failed")
	says("this is text, not a recording")

	do(chromedp.Navigate(server.url + "/recordings?state=done"))
	says("−18.0")
	click("main table a[href^='/recordings/']")
	says("−18.0 LUFS")
	until(`!!document.querySelector("[data-part=plot] canvas")`)
	for _, c := range told() {
		if !strings.Contains(c, "/favicon.ico") {
			t.Error(c)
		}
	}
}
