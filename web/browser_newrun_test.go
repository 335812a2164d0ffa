package web

import (
	"context"
	"fmt"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
	"evenshelf/web/webtest"
)

// testProfiles looks at the choice of a profile: the usual one comes first and is chosen, they are in sight, and only of
// the chosen one it is told in detail what it does. Arrow keys choose another.
func testProfiles(t *testing.T, ctx context.Context) {
	says := func(words string) string {
		return fmt.Sprintf(`document.querySelector("dialog[open]").innerText.includes(%q)`, words)
	}
	chosen := `document.querySelector("dialog[open] input[name=profile]:checked")`
	until(t, ctx, chosen+`?.value === "rotation" && `+chosen+` === document.querySelector("dialog[open] input[name=profile]")`)
	until(t, ctx, says("The whole programme is brought to −18 LUFS")+` && !`+says("Speech is brought to"))
	until(t, ctx, says("3 files in the profiles folder cannot be used: a.toml, b.toml, c.toml."))
	for width, inSight := range map[int64]float64{1280: 6, 390: 3} { // on a phone what is done takes more lines
		webtest.Do(t, ctx, chromedp.EmulateViewport(width, 844))
		if seen := webtest.Eval[float64](t, ctx, `(() => { const d = document.querySelector("dialog[open]"); const end = d.querySelector(".actions").getBoundingClientRect().top;
			return [...d.querySelectorAll("input[name=profile]")].filter((i) => i.getBoundingClientRect().bottom <= end).length; })()`); seen < inSight {
			t.Errorf("%g profiles are in sight at a width of %d", seen, width)
		}
		if wide := webtest.Eval[int](t, ctx, `document.querySelector("dialog[open]").scrollWidth - document.querySelector("dialog[open]").clientWidth`); wide > 0 {
			t.Errorf("the dialog scrolls sideways by %d px at a width of %d", wide, width)
		}
	}
	webtest.Do(t, ctx, chromedp.EmulateViewport(1280, 980), chromedp.Focus(chromedp.CSS("dialog[open] input[value=rotation]")),
		chromedp.KeyEvent(kb.ArrowDown), chromedp.KeyEvent(kb.ArrowDown))
	until(t, ctx, chosen+`.value === "film" && `+says("Speech is brought to −23 LUFS, within 0.3 LU")+` && !`+says("programme is brought to −18 LUFS"))
}

// testTags starts a run that writes gain tags: it asks which recordings belong together instead of how they should sound,
// and takes a second step, as it writes to the shelf.
func testTags(t *testing.T, ctx context.Context, url string, f *fake) {
	for len(f.asked) > 0 {
		<-f.asked
	}
	webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
	until(t, ctx, `!document.querySelector("[data-component=newrun]").disabled`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=newrun]").click()`)
	until(t, ctx, `!document.querySelector("dialog[open] [type=submit]").disabled`)
	shown := func(part string) bool {
		return webtest.Eval[bool](t, ctx, fmt.Sprintf(`!!document.querySelector("dialog[open] [data-part=%s]").offsetParent`, part))
	}
	if !shown("file") || !shown("group") || shown("single") || !webtest.Eval[bool](t, ctx, `document.querySelector("dialog[open] [name=group]").value === ""`) {
		t.Error("a run that levels asks how a single channel counts, or not for a format and a group")
	}
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [name=format]").value = "flac"`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [value=replace]").click()`)
	if !webtest.Eval[bool](t, ctx, `!document.querySelector("dialog[open] [data-part=inplace]").hidden`) {
		t.Error("nothing is said of files that cannot take their original's place")
	}
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [value=tags]").click()`)
	if shown("file") || shown("how") || !shown("single") || !shown("group") || !shown("sure") || !webtest.Eval[bool](t, ctx, `document.querySelector("dialog[open] [name=group]").value === "none"`) {
		t.Error("a run for tags asks for a format or a profile, or not for a group, a single channel and a second step")
	}
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [value=two-loudspeakers]").click()`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [name=group]").value = "album"`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [name=sure]").click()`)
	webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [type=submit]").click()`)
	until(t, ctx, `location.pathname === "/runs/12"`)
	if body := <-f.asked; !strings.Contains(body, `"delivery":"tags"`) || !strings.Contains(body, `"group":"album"`) || !strings.Contains(body, fmt.Sprintf(`"profile":%q`, twoLoudspeakers(t))) || strings.Contains(body, "format") {
		t.Errorf("asked for %s", body)
	}
}

// twoLoudspeakers is the first profile that counts a single channel so.
func twoLoudspeakers(t *testing.T) string {
	t.Helper()
	for _, p := range profile.Gather("").All {
		if p.Mono == audio.TwoLoudspeakers {
			return p.Name
		}
	}
	t.Fatal("no profile counts a single channel as two loudspeakers play it")
	return ""
}

// testRestoreAll brings all originals of a run back; those that cannot be are named, and stay.
func testRestoreAll(t *testing.T, ctx context.Context) {
	for _, page := range []string{"/runs/12", "/shelves/1"} {
		f := newReplaced(40)
		webtest.Do(t, ctx, chromedp.Navigate(serve(t, f)+page))
		until(t, ctx, `document.querySelector("[data-component=restoreall]")?.disabled === false`)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=restoreall]").click()`)
		f.apiDown.Store(true)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [type=submit]").click()`)
		until(t, ctx, `document.querySelector("dialog[open] .says").textContent.startsWith("0 originals are back in place.") && document.querySelector("dialog[open] .failed").textContent.includes("changed since")`)
		f.apiDown.Store(false)
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("dialog[open] [type=submit]").click()`)
		until(t, ctx, `document.readyState === "complete" && !document.querySelector("[data-component=restoreall]")`)
		if len(f.attic) > 0 {
			t.Errorf("%s: %d are left", page, len(f.attic))
		}
	}
}

func testReplacing(t *testing.T, ctx context.Context, url string, f *fake) {
	for len(f.asked) > 0 {
		<-f.asked // those of other tests
	}
	webtest.Do(t, ctx, chromedp.Navigate(url+"/"))
	until(t, ctx, `!document.querySelector("[data-component=newrun]").disabled`)
	open := func() {
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector("[data-component=newrun]").click()`)
		until(t, ctx, `document.querySelectorAll("dialog[open] input[name=profile]").length === 6 && !document.querySelector("dialog[open] [type=submit]").disabled`)
	}
	press := func(what string) {
		webtest.Eval[chromedp.Void](t, ctx, `document.querySelector('dialog[open] `+what+`').click()`)
	}
	sure := func(state string) bool {
		return webtest.Eval[bool](t, ctx, `(({ checked, required, offsetParent }) => `+state+`)(document.querySelector("[name=sure]"))`)
	}
	open()
	if !sure("!offsetParent && !required") {
		t.Error("the second step is asked for before replace is chosen")
	}
	press("[value=replace]")
	press("[type=submit]")
	if len(f.asked) > 0 || !sure("offsetParent && required && !checked") || !webtest.Eval[bool](t, ctx, `document.querySelector("dialog").open`) {
		t.Error("a run that replaces was started in one step")
	}
	// Neither another choice nor another look at the dialog leaves a yes behind.
	press("[name=sure]")
	press("[value=copy]")
	press("[value=replace]")
	if !sure("!checked") {
		t.Error("the yes outlived another choice")
	}
	press("[name=sure]")
	press("[data-part=close]")
	open()
	if !sure("offsetParent && required && !checked") {
		t.Error("the yes outlived the dialog")
	}
	press("[name=sure]")
	press("[type=submit]")
	until(t, ctx, `location.pathname === "/runs/12"`)
	if body := <-f.asked; !strings.Contains(body, `"delivery":"replace"`) || len(f.asked) > 0 {
		t.Errorf("asked for %s and %d more", body, len(f.asked))
	}
}
