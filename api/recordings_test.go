package api

import (
	"compress/gzip"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/url"
	"strings"
	"testing"

	"evenshelf/engine/level"
	"evenshelf/store"
)

func TestRecordingsPageByPage(t *testing.T) {
	h := open(t, nil)
	for i := range 5 {
		h.write(h.shelf.Root, fmt.Sprintf("more/%d.wav", i), strings.Repeat("x", i+1))
	}
	if r := h.ask("POST", at("/shelves/%d/scan", h.shelf.ID), ""); r.status != 200 || !strings.Contains(string(r.body), `"added":5`) {
		t.Fatalf("scan: %s", r.body)
	}
	var seen []string
	cursor := ""
	for {
		var page store.RecordingPage
		h.get(at("/recordings?shelf=%d&limit=3&order=desc&sort=path&cursor=%s", h.shelf.ID, url.QueryEscape(cursor))).into(t, 200, &page)
		if page.Total != 7 {
			t.Errorf("total %d", page.Total)
		}
		for _, r := range page.Recordings {
			seen = append(seen, r.Path)
		}
		if cursor = page.Next; cursor == "" {
			break
		}
	}
	want := "more/4.wav more/3.wav more/2.wav more/1.wav more/0.wav " + loudSong + " " + quietSong
	if got := strings.Join(seen, " "); got != want {
		t.Errorf("got %s\nwant %s", got, want)
	}
	var page store.RecordingPage
	h.get(at("/recordings?folder=evening&q=%s&state=never", url.QueryEscape("ЛОДКА"))).into(t, 200, &page)
	if len(page.Recordings) != 1 || page.Recordings[0].Path != loudSong {
		t.Errorf("search found %+v", page)
	}
}

func TestRecordingTellsItsStory(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.start()
	h.finish(jobs[0], level.Held)
	var got map[string]json.RawMessage
	h.get(at("/recordings/%d", jobs[0].RecordingID)).into(t, 200, &got)
	for field, part := range map[string]string{
		"recording": `"state":"held"`, "before": `"integrated_lufs":-31.26`, "after": `"loudness_range_lu":null`,
		"jobs": `"reason":"13.2 dB more"`, "history": `"what":"held"`,
	} {
		if !strings.Contains(string(got[field]), part) {
			t.Errorf("%s lacks %s: %s", field, part, got[field])
		}
	}
	h.get(at("/recordings/%d", jobs[1].RecordingID)).into(t, 200, &got)
	if string(got["before"]) != "null" || string(got["after"]) != "null" {
		t.Errorf("readings out of nothing: %s %s", got["before"], got["after"])
	}
}

func TestTimelineHasOneDecimalAndNullForSilence(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.start()
	empty := `{"step_s":0.1,"before":null,"after":null,"ride":null}`
	if got := h.get(at("/recordings/%d/timeline", jobs[0].RecordingID)); strings.TrimSpace(string(got.body)) != empty {
		t.Errorf("%d %s", got.status, got.body)
	}
	h.finish(jobs[0], level.Done)
	curves := `{"short_term":[null,-40,-31.3],"momentary":[null,-31.3,0],"peak":[null,-12.3,-12.4],"active":[false,true,true],"speech":[0,7,93]}`
	want := `{"step_s":0.1,"before":` + curves + `,"after":` + curves + `,"ride":{"gain_db":[-3.1,0.04,4,4],"steady_db":13.2}}`
	if got := h.get(at("/recordings/%d/timeline", jobs[0].RecordingID)); strings.TrimSpace(string(got.body)) != want {
		t.Errorf("got  %s\nwant %s", got.body, want)
	}
}

// The curve of a ride goes to those who draw it, not into every list of jobs.
func TestJobsTellTheRideWithoutItsCurve(t *testing.T) {
	h := open(t, nil)
	run, jobs := h.start()
	h.finish(jobs[0], level.Held)
	for _, path := range []string{at("/recordings/%d", jobs[0].RecordingID), at("/runs/%d/jobs", run.ID)} {
		var got struct{ Jobs []map[string]any }
		h.get(path).into(t, 200, &got)
		plan := got.Jobs[0]["plan"].(map[string]any)
		if ride := plan["ride"].(map[string]any); ride["most_db"] != 4.0 || ride["curve"] != nil || plan["anchor"] != "speech" {
			t.Errorf("%s: plan %v", path, plan)
		}
		if got, want := fmt.Sprint(got.Jobs[0]["doubts"]), "[map[at_s:0.2 code:limiting words:as heard] map[at_s:<nil> code:noise words:all of it]]"; got != want {
			t.Errorf("%s: doubts %s, want %s", path, got, want)
		}
		if got := got.Jobs[0]["foreseen"].(map[string]any)["integrated_lufs"]; got != -18.01 {
			t.Errorf("%s: foreseen %v", path, got)
		}
		if treated := got.Jobs[0]["treatment"].(map[string]any); treated["deepest_at_s"] != 0.2 || treated["order"] != nil {
			t.Errorf("%s: treatment %v", path, treated)
		}
	}
}

// A timeline kept before speech was looked for says so, rather than that nobody speaks.
func TestTimelineWithoutSpeech(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.start()
	h.finish(jobs[0], level.Done)
	if _, err := h.db.Writer().Exec(`UPDATE timelines SET course = NULL`); err != nil {
		t.Fatal(err)
	}
	got := h.get(at("/recordings/%d/timeline", jobs[0].RecordingID))
	if got.status != 200 || strings.Count(string(got.body), `"active":null,"speech":null`) != 2 {
		t.Errorf("%d %s", got.status, got.body)
	}
}

func TestSpinesAreRowsOfTheChart(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.start()
	h.finish(jobs[1], level.Done)
	path := at("/shelves/%d/spines", h.shelf.ID)
	plain := h.get(path, "Accept-Encoding", "identity")
	var got struct {
		Target  float64 `json:"target_lufs"`
		Columns []string
		Rows    [][]any
	}
	plain.into(t, 200, &got)
	if got.Target != -18 || len(got.Columns) != 11 || len(got.Rows) != 2 {
		t.Fatalf("%s", plain.body)
	}
	for _, row := range got.Rows {
		want := []any{float64(jobs[0].RecordingID), jobs[0].Path, "waiting", nil, nil, nil, nil, nil, nil, nil, nil}
		if row[0] == float64(jobs[1].RecordingID) {
			want = []any{float64(jobs[1].RecordingID), jobs[1].Path, "done", -31.26, -33.26, -29.26, -12.5, -18.04, -20.04, -16.04, -3.0}
		}
		if fmt.Sprint(row) != fmt.Sprint(want) {
			t.Errorf("got  %v\nwant %v", row, want)
		}
	}

	packed := h.get(path, "Accept-Encoding", "gzip")
	zr, err := gzip.NewReader(strings.NewReader(string(packed.body)))
	if err != nil {
		t.Fatal(err)
	}
	if b, err := io.ReadAll(zr); err != nil || string(b) != string(plain.body) {
		t.Errorf("gzip: %v %s", err, b)
	}
	tag := plain.header.Get("ETag")
	if tag == "" || packed.header.Get("ETag") != tag || packed.header.Get("Vary") != "Accept-Encoding" {
		t.Errorf("headers %v and %v", plain.header, packed.header)
	}
	if r := h.get(path, "If-None-Match", `"x", `+tag); r.status != 304 || len(r.body) != 0 {
		t.Errorf("known rows: %d %s", r.status, r.body)
	}
	h.finish(jobs[0], level.Done)
	if r := h.get(path, "If-None-Match", tag); r.status != 200 || r.header.Get("ETag") == tag {
		t.Errorf("changed rows: %d", r.status)
	}
	if r := h.get(at("/shelves/%d/spines", h.inbox.ID), "Accept-Encoding", "identity"); !strings.HasPrefix(string(r.body), `{"target_lufs":null,`) || !strings.HasSuffix(string(r.body), "\"rows\":[]}\n") {
		t.Errorf("empty shelf: %s", r.body)
	}
}

func TestFiguresThatJSONCannotSay(t *testing.T) {
	for v, want := range map[float64]string{math.Inf(-1): "null", math.NaN(): "null", -0.001: "0", -23.456: "-23.46", 7: "7"} {
		if got := string(appendFigure(nil, &v)); got != want {
			t.Errorf("%g: %s, want %s", v, got, want)
		}
	}
}

// The cases follow RFC 9110, 12.5.3.
func TestAcceptEncoding(t *testing.T) {
	for header, want := range map[string]bool{"": false, "gzip": true, "br, gzip": true, "GZIP": true, "gzip;q=0": false, "gzip; q=0.5": true,
		"*": true, "*;q=0": false, "br": false, "*, gzip;q=0": false, "identity": false, "gzip;q=x": false, "notgzip": false} {
		if got := acceptsGzip(header); got != want {
			t.Errorf("%q: %v", header, got)
		}
	}
}

func BenchmarkSpines(b *testing.B) {
	v := func(x float64) *float64 { return &x }
	s := spines{rows: make([]store.Spine, 100_000)}
	for i := range s.rows {
		x := -40 + float64(i%3000)/100
		f := &store.Figures{Integrated: v(x), ShortTerm10: v(x - 3), ShortTerm95: v(x + 3), TruePeak: v(x + 12)}
		s.rows[i] = store.Spine{ID: int64(i + 1), Path: fmt.Sprintf("folder %d/recording %d.wav", i/100, i), State: store.Done, Before: f, After: f}
	}
	for name, to := range map[string]io.Writer{"plain": io.Discard, "gzip": fastGzip(b)} {
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if err := s.write(to); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(len(s.rows)), "rows/op")
		})
	}
}

func fastGzip(b *testing.B) io.Writer {
	zw, err := gzip.NewWriterLevel(io.Discard, gzip.BestSpeed)
	if err != nil {
		b.Fatal(err)
	}
	return zw
}
