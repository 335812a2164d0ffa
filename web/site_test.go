package web

import (
	"errors"
	"net/http"
	"net/http/httptest"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

func init() { gin.SetMode(gin.ReleaseMode) }

// *store.Store must go on being what the pages read.
var _ Store = (*store.Store)(nil)

func newSite(t *testing.T, s Store) *gin.Engine {
	t.Helper()
	site, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	site.now = func() time.Time { return noon }
	e := gin.New()
	site.Register(e)
	e.NoRoute(site.NotFound)
	return e
}

func fetch(t *testing.T, h http.Handler, path string) (*httptest.ResponseRecorder, string) {
	t.Helper()
	w := httptest.NewRecorder()
	h.ServeHTTP(w, httptest.NewRequest(http.MethodGet, path, nil))
	return w, w.Body.String()
}

var spaces = regexp.MustCompile(`\s+`)

// words is a page's text without its mark-up, with single spaces.
func words(html string) string {
	return spaces.ReplaceAllString(regexp.MustCompile(`<[^>]*>`).ReplaceAllString(html, ""), " ")
}

// The addresses that between them show every state of every page.
func everyPage() map[string]struct {
	store *fake
	paths []string
} {
	type pages = struct {
		store *fake
		paths []string
	}
	full, finished, waiting := newFake(96), newFake(40), newFake(10)
	finished.runList[0].State, finished.runList[0].FinishedAt = store.RunFinished, new(noon)
	finished.shelfList[0].LastRun = &finished.runList[0]
	measuring := newFake(40)
	measuring.runList[0].Delivery = store.Measure
	measuring.shelfList[0].LastRun = &measuring.runList[0]
	withTags := newReplaced(40)
	withTags.runList[0].Delivery, withTags.runList[0].Group = store.Tags, profile.Album
	waiting.runList[0].State, waiting.runList[0].StartedAt = store.RunWaiting, nil
	cancelled := newFake(30)
	stopped := &cancelled.runList[0]
	stopped.State, stopped.Jobs, stopped.Done, stopped.Held, stopped.Failed = store.RunCancelled, 30, 11, 2, 1
	stopped.Waiting, stopped.Working, stopped.Cancelled = 0, 0, 16
	fresh := &fake{shelfList: []store.ShelfSummary{{Shelf: store.Shelf{ID: 1, Name: "uploads"}}}}
	unmeasured := newFake(5)
	unmeasured.shelfList[0].Measured = 0
	return map[string]pages{
		"full": {full, []string{"/", "/shelves/1", "/runs", "/runs/12", "/runs/12?state=held", "/recordings", "/recordings?state=held&sort=after&order=desc",
			"/recordings?run=12&q=amber", "/recordings/1", "/recordings/2", "/recordings/3", "/recordings/14", "/recordings/18", "/recordings/42", "/recordings/41"}},
		"finished":   {finished, []string{"/runs/12", "/"}},
		"measuring":  {measuring, []string{"/", "/runs", "/runs/12"}},
		"waiting":    {waiting, []string{"/runs/12"}},
		"replaced":   {newReplaced(40), []string{"/", "/shelves/1", "/runs", "/runs/12", "/recordings/1", "/recordings/2", "/recordings/18"}},
		"tags":       {withTags, []string{"/", "/shelves/1", "/runs", "/runs/12", "/recordings/1", "/recordings/2"}},
		"cancelled":  {cancelled, []string{"/runs/12"}},
		"unmeasured": {unmeasured, []string{"/"}},
		"fresh":      {fresh, []string{"/", "/shelves/1"}},
		"empty":      {&fake{}, []string{"/", "/runs", "/recordings", "/recordings?q=nothing", "/shelves/4", "/no/such/page"}},
	}
}

func TestPagesAreCompleteAndPlain(t *testing.T) {
	inline := regexp.MustCompile(`(?i)<[a-z][^\s>]*(?:\s+[a-z-]+(?:="[^"]*")?)*\s+(?:style|on[a-z]+)\s*=|<style|javascript:|<script(?:[^>]*)>[^<]`)
	outside := regexp.MustCompile(`(?:src|href|action)="(?:https?:)?//`)
	for name, p := range everyPage() {
		e := newSite(t, p.store)
		for _, path := range p.paths {
			w, body := fetch(t, e, path)
			want := 200
			if path == "/shelves/4" || path == "/no/such/page" {
				want = 404
			}
			if w.Code != want {
				t.Errorf("%s %s: status %d, want %d", name, path, w.Code, want)
			}
			if !strings.Contains(body, "<main") || !strings.HasSuffix(strings.TrimSpace(body), "</html>") {
				t.Errorf("%s %s: not a whole page", name, path)
			}
			if m := inline.FindString(body); m != "" {
				t.Errorf("%s %s: inline script or style: %q", name, path, m)
			}
			if m := outside.FindString(body); m != "" {
				t.Errorf("%s %s: asks another origin: %q", name, path, m)
			}
			if strings.Contains(body, "<img src=x") {
				t.Errorf("%s %s: a file name became mark-up", name, path)
			}
			for _, bad := range []string{"NaN", "Inf", "&lt;nil&gt;", "%!", "<no value>", "ZgotmplZ"} {
				if strings.Contains(body, bad) {
					t.Errorf("%s %s: %q leaked into the page", name, path, bad)
				}
			}
			if w.Header().Get("Content-Security-Policy") != policy {
				t.Errorf("%s %s: policy is %q", name, path, w.Header().Get("Content-Security-Policy"))
			}
		}
	}
}

func TestPolicyForbidsInlineAndForeign(t *testing.T) {
	for _, want := range []string{"default-src 'none'", "script-src 'self'", "style-src 'self'", "frame-ancestors 'none'", "base-uri 'none'"} {
		if !strings.Contains(policy, want) {
			t.Errorf("policy lacks %q", want)
		}
	}
	if strings.Contains(policy, "unsafe") || strings.Contains(policy, "http") {
		t.Errorf("policy is weaker than it should be: %s", policy)
	}
}

func TestSentences(t *testing.T) {
	all := everyPage()
	// The figures are those of the invented shelf: 96 recordings, its extremes and counts.
	for _, c := range []struct{ state, path, want string }{
		{"full", "/", "Quietest to loudest differ by 41.0 LU as they arrived, and by 0.5 LU since they were levelled."},
		{"full", "/", "83 levelled, 3 held for a listen, 1 failed"},
		{"full", "/shelves/1", "Run 12 is levelling it with rotation now."},
		{"measuring", "/", "Run 12 is measuring it now."},
		{"measuring", "/runs/12", "Run 12, started today at 11:20: only measuring, nothing is written."},
		{"measuring", "/runs", "Run 12, today at 11:20: only measuring, nothing is written."},
		{"measuring", "/runs/12", "RecordingLoudnessRangeTrue peakStateWhy"},
		{"finished", "/", "Last levelled with rotation today at 11:20."},
		{"full", "/runs/12", "87 of 93 recordings ended, about 4 minutes left."},
		{"full", "/runs/12?state=held", "clipped at the source 214 times; the copy may sound harsh"},
		{"full", "/recordings/49", "Held for a listen: clipped at the source 214 times; the copy may sound harsh. L"},
		{"full", "/recordings/18", "Held for a listen, for the reasons below. Lowered by 6.3 LU to −17.9 LUFS, with a ride between −12.6 and −0.4 dB; compressed."},
		{"full", "/recordings/18", "1:23.2clipped 214 times, first at 1:23.2 0:41.7its peaks are held by more than 3 dB in 31 % of the time listen from the startits noise"},
		{"full", "/recordings/18", "listen from the startits noise floor is 12 dB louder than it was"},
		{"full", "/recordings?state=held", "1:23.2: clipped 214 times, first at 1:23.2 and 2 more"},
		{"full", "/runs/12?state=held", "1:23.2: clipped 214 times, first at 1:23.2 and 2 more"},
		{"full", "/runs/12?state=held", "−12.6 … −0.4"},
		{"full", "/recordings/42", "Could not be levelled: the file ends in the middle of its header. The file on the shelf is as it was."},
		{"full", "/recordings/14", "Measured, not levelled yet."},
		{"full", "/recordings?run=12&q=amber", "of run 12"},
		{"finished", "/runs/12", "34 of 39 recordings done, 1 held for a listen."},
		{"full", "/shelves/1", "/srv/radio/evening-even.attic"},
		{"full", "/runs/12", "levelled copies; originals not touched."},
		{"replaced", "/runs/12", "levelled files in place of the originals, which go to the attic first."},
		{"replaced", "/runs/12", "The originals it replaced are in the attic; a recording's page brings its own back, the button above all of them, as does evenshelf restore --of-run 12"},
		{"replaced", "/runs/12", "2 originals of its recordings are kept for run 13, which wrote those files again."},
		{"replaced", "/shelves/1", "In the attic now33 originals and 1 other version, 1.4 GB Bring the originals back"},
		{"replaced", "/recordings/2", "/srv/radio/evening-even.attic/mine.0123456789ab.wav with other tags, kept today at 11:31"},
		{"replaced", "/recordings/2", "The original is in the attic; the levelled file of run 12 took its place today at 11:31."},
		{"replaced", "/recordings/2", "Delivered in the original's place."},
		{"replaced", "/recordings/18", "The file on the shelf was not replaced."},
		{"replaced", "/recordings/1", "The original is back in its place, bit for bit."},
		{"replaced", "/recordings/1", "the original is back, bit for bit"},
		{"tags", "/runs/12", "one gain for an album: gain tags written into the files; the originals go to the attic first."},
		{"tags", "/recordings/2", "The original is in the attic; the same with the gain tags of run 12 took its place today at 11:31."},
		{"tags", "/shelves/1", "Bring back every original of evening-music?"},
		{"waiting", "/runs/12", "recordings wait for the first free hand."},
		{"cancelled", "/runs/12", "Cancelled after 14 of 30 recordings; what was done stays done."},
		{"unmeasured", "/", "5 recordings found, none measured yet."},
		{"fresh", "/", "No shelf yet"},
		{"fresh", "/", "They go to the shelf uploads and are kept as they are."},
		{"empty", "/", "No shelf yet"},
		{"empty", "/", "evenshelf try"},
		{"empty", "/runs", "No run yet."},
		{"empty", "/recordings", "No recordings yet."},
		{"empty", "/recordings?q=nothing", "Nothing matches."},
		{"empty", "/shelves/4", "Nothing here"},
	} {
		_, body := fetch(t, newSite(t, all[c.state].store), c.path)
		got := words(body)
		if !strings.Contains(got, c.want) {
			t.Errorf("%s %s does not say %q", c.state, c.path, c.want)
		}
	}
}

// Where a sentence would not be true, it is not said.
func TestSentencesThatAreNotSaid(t *testing.T) {
	empty := newReplaced(40)
	empty.attic = nil
	all := everyPage()
	all["emptied"] = struct {
		store *fake
		paths []string
	}{store: empty}
	for _, c := range []struct{ state, path, not string }{
		{"full", "/runs/12", "attic"},
		{"full", "/", "Last levelled"},
		{"measuring", "/runs/12", "−18.0 LUFS"},
		{"full", "/recordings/18", "attic"},
		{"full", "/recordings/18", "not replaced"},
		{"replaced", "/runs/12", "not touched"},
		{"replaced", "/recordings/1", "attic"},
		{"replaced", "/recordings/1", "Delivered"},
		{"replaced", "/recordings/18", "attic"},
		{"replaced", "/recordings/18", "in the original's place"},
		{"emptied", "/runs/12", "are in the attic"},
		{"emptied", "/recordings/2", "Bring the original back"},
	} {
		w, body := fetch(t, newSite(t, all[c.state].store), c.path)
		if w.Code != 200 || strings.Contains(words(body), c.not) {
			t.Errorf("%s %s: status %d, and it says %q", c.state, c.path, w.Code, c.not)
		}
	}
}

func TestHostileNamesStayText(t *testing.T) {
	f := newFake(96)
	_, body := fetch(t, newSite(t, f), "/recordings/1")
	if !strings.Contains(body, `&lt;img src=x onerror=alert(1)&gt; &amp; &#34;quotes&#34; &#39;n&#39; {{.}}.wav</h1>`) {
		t.Error("the name is not shown as it is written")
	}
	if _, body = fetch(t, newSite(t, f), `/recordings?q=%22%3E%3Cscript%3Ealert(1)%3C/script%3E`); strings.Contains(body, "<script>alert") {
		t.Error("the search text became mark-up")
	}
	if _, body = fetch(t, newSite(t, f), "/recordings/2"); !strings.Contains(body, `<h1 dir="auto"`) {
		t.Error("a right-to-left name has no direction of its own")
	}
}

func TestUndefinedFiguresAreDashes(t *testing.T) {
	f := newFake(10)
	f.recs[0].Before.Integrated, f.recs[0].Before.Range = nil, nil
	_, body := fetch(t, newSite(t, f), "/recordings")
	if strings.Count(body, `title="not defined">–<`) < 2 {
		t.Error("undefined figures are not shown as dashes that say so")
	}
}

func TestStoreFailureIsAPage(t *testing.T) {
	f := newFake(10)
	f.broken = errors.New("disk on fire at /srv/secret")
	for _, path := range []string{"/", "/shelves/1", "/runs", "/runs/12", "/recordings", "/recordings/1"} {
		w, body := fetch(t, newSite(t, f), path)
		if w.Code != 500 || !strings.Contains(body, "This page could not be made") {
			t.Errorf("%s: status %d and no page that says so", path, w.Code)
		}
		if strings.Contains(body, "disk on fire") {
			t.Errorf("%s shows the cause, which belongs in the log", path)
		}
	}
}

func TestUnknownIDs(t *testing.T) {
	e := newSite(t, newFake(10))
	for _, path := range []string{"/shelves/99", "/shelves/x", "/runs/-1", "/recordings/0", "/recordings/99999999999999999999"} {
		if w, _ := fetch(t, e, path); w.Code != 404 {
			t.Errorf("%s: status %d, want 404", path, w.Code)
		}
	}
}

func TestStaticFilesAreCachedForGood(t *testing.T) {
	e := newSite(t, newFake(10))
	_, body := fetch(t, e, "/")
	found := regexp.MustCompile(`(?:href|src)="(/static/[0-9a-f]{12}/[^"]+)"`).FindAllStringSubmatch(body, -1)
	if len(found) < 8 {
		t.Fatalf("the page names %d static files", len(found))
	}
	for _, m := range found {
		w, _ := fetch(t, e, m[1])
		if w.Code != 200 || w.Header().Get("Cache-Control") != "public, max-age=31536000, immutable" || w.Header().Get("X-Content-Type-Options") != "nosniff" {
			t.Errorf("%s: %d %v", m[1], w.Code, w.Header())
		}
	}
	path := found[0][1]
	for _, bad := range []string{strings.Replace(path, path[8:20], "000000000000", 1), path + "x", path[:20] + "/pages/layout.html", path[:20] + "/components/spine/spine.html"} {
		if w, _ := fetch(t, e, bad); w.Code != 404 || w.Header().Get("Cache-Control") != "no-store" {
			t.Errorf("%s: status %d, kept as %q", bad, w.Code, w.Header().Get("Cache-Control"))
		}
	}
}

func TestScriptsNeverWriteMarkup(t *testing.T) {
	a, err := loadAssets()
	if err != nil {
		t.Fatal(err)
	}
	bad := regexp.MustCompile(`innerHTML|outerHTML|insertAdjacentHTML|document\.write|\beval\(|new Function|https?://`)
	for name, b := range a.files {
		if strings.HasSuffix(name, ".js") && !strings.HasPrefix(name, "vendor/") {
			if m := bad.Find(b); m != nil {
				t.Errorf("%s uses %s", name, m)
			}
		}
	}
}

func TestRecordingsPaging(t *testing.T) {
	e := newSite(t, newFake(250))
	_, body := fetch(t, e, "/recordings?sort=after&order=desc&q=a")
	next := regexp.MustCompile(`href="(/recordings\?[^"]*)" rel="next"`).FindStringSubmatch(body)
	if next == nil {
		t.Fatal("no next page")
	}
	href := strings.ReplaceAll(next[1], "&amp;", "&")
	for _, want := range []string{"cursor=100", "order=desc", "q=a", "sort=after"} {
		if !strings.Contains(href, want) {
			t.Errorf("the next page %s forgets %s", href, want)
		}
	}
	if !strings.Contains(body, `aria-sort="descending"><a href="/recordings?q=a&amp;sort=after"`) {
		t.Error("the heading of the sorted column does not turn the order round")
	}
	if _, body = fetch(t, e, href); !strings.Contains(body, "First page") {
		t.Error("the second page does not lead back to the first")
	}
}
