package api

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/level"
	"evenshelf/store"
)

// event is one server-sent event as the WHATWG HTML standard's parser sees it; a comment has only words.
type event struct{ name, id, data, comment string }

// scanEvents parses a stream and hands over each event and comment as it comes.
func scanEvents(r io.Reader, each func(event)) {
	var e event
	for lines := bufio.NewScanner(r); lines.Scan(); {
		field, value, _ := strings.Cut(lines.Text(), ":")
		value = strings.TrimPrefix(value, " ")
		switch {
		case lines.Text() == "":
			if e != (event{}) {
				each(e)
			}
			e = event{}
		case field == "":
			e.comment = value
		case field == "event":
			e.name = value
		case field == "id":
			e.id = value
		case field == "data":
			e.data += value
		}
	}
}

func readEvents(r io.Reader) (all []event) {
	scanEvents(r, func(e event) { all = append(all, e) })
	return all
}

// stream is a connected follower.
type stream struct {
	t      *testing.T
	events chan event // closed when the server closes
	leave  context.CancelFunc
}

func (h *house) follow(path string, headers ...string) *stream {
	h.t.Helper()
	ctx, leave := context.WithCancel(h.t.Context())
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, h.url+path, nil)
	if err != nil {
		h.t.Fatal(err)
	}
	for i := 0; i+1 < len(headers); i += 2 {
		req.Header.Set(headers[i], headers[i+1])
	}
	resp, err := http.DefaultTransport.RoundTrip(req)
	if err != nil {
		h.t.Fatal(err)
	}
	if resp.StatusCode != 200 || resp.Header.Get("Content-Type") != "text/event-stream" {
		h.t.Fatalf("%s: %s %v", path, resp.Status, resp.Header)
	}
	s := &stream{h.t, make(chan event, 10_000), leave}
	go func() {
		defer close(s.events)
		defer resp.Body.Close()
		scanEvents(resp.Body, func(e event) { s.events <- e })
	}()
	h.t.Cleanup(leave)
	return s
}

// until collects events up to the first that fits.
func (s *stream) until(what string, fits func(event) bool) (seen []event) {
	s.t.Helper()
	timeout := time.After(10 * time.Second)
	for {
		select {
		case e, open := <-s.events:
			if !open {
				s.t.Fatalf("the stream ended before %s; seen %v", what, seen)
			}
			seen = append(seen, e)
			if fits(e) {
				return seen
			}
		case <-timeout:
			s.t.Fatalf("no %s; seen %v", what, seen)
		}
	}
}

func (s *stream) ends() {
	s.t.Helper()
	timeout := time.After(10 * time.Second)
	for {
		select {
		case _, open := <-s.events:
			if !open {
				return
			}
		case <-timeout:
			s.t.Fatal("the stream does not end")
		}
	}
}

func named(name string) func(event) bool { return func(e event) bool { return e.name == name } }

func jobIDs(events []event) (ids []string) {
	for _, e := range events {
		if e.name == "job" {
			ids = append(ids, e.id)
		}
	}
	return ids
}

func TestFollowARunToItsEnd(t *testing.T) {
	h := open(t, nil)
	run, jobs := h.start()
	path := at("/runs/%d/events", run.ID)
	s := h.follow(path)
	seen := s.until("first progress", named("run"))
	if len(seen) != 2 || seen[0].name != "job" || !strings.Contains(seen[0].data, `"what":"run-started"`) {
		t.Fatalf("replay: %v", seen)
	}
	for _, j := range jobs {
		h.finish(j, level.Done)
	}
	seen = append(seen, s.until("end", named("end"))...)
	s.ends()

	// What was sent is what the store has, once each and in order.
	events, err := h.db.RunEvents(t.Context(), run.ID, 0, 100)
	if err != nil {
		t.Fatal(err)
	}
	var want []string
	for _, e := range events {
		want = append(want, strconv.FormatInt(e.ID, 10))
	}
	if got := jobIDs(seen); len(want) < 4 || !slices.Equal(got, want) {
		t.Errorf("events %v, want %v", got, want)
	}
	var last store.Run
	if err := json.Unmarshal([]byte(seen[len(seen)-1].data), &last); err != nil || last.State != store.RunFinished || last.Done != 2 {
		t.Errorf("end carries %+v, %v", last, err)
	}

	// A late follower gets everything, one that was there before only the rest; the header is newer than the address.
	if got := jobIDs(readEvents(strings.NewReader(string(h.get(path).body)))); !slices.Equal(got, want) {
		t.Errorf("replay %v, want %v", got, want)
	}
	for _, ask := range [][]string{{path + "?after=" + want[1]}, {path, "Last-Event-ID", want[1]}, {path + "?after=0", "Last-Event-ID", want[1]}} {
		if got := jobIDs(readEvents(strings.NewReader(string(h.get(ask[0], ask[1:]...).body)))); !slices.Equal(got, want[2:]) {
			t.Errorf("%v: %v, want %v", ask, got, want[2:])
		}
	}
	h.get(path, "Last-Event-ID", "x").wantProblem(t, kindBadRequest, "Last-Event-ID")
}

func TestReplayInBatches(t *testing.T) {
	h := open(t, nil)
	h.api.pace.batch = 2
	run, jobs := h.start()
	for _, j := range jobs {
		h.finish(j, level.Held)
	}
	got := jobIDs(readEvents(strings.NewReader(string(h.get(at("/runs/%d/events", run.ID)).body))))
	events, err := h.db.RunEvents(t.Context(), run.ID, 0, 100)
	if err != nil || len(got) != len(events) || len(got) < 5 {
		t.Errorf("%d of %d events, %v", len(got), len(events), err)
	}
}

func TestCancelledRunEnds(t *testing.T) {
	h := open(t, nil)
	run, _ := h.start()
	s := h.follow(at("/runs/%d/events", run.ID))
	s.until("progress", named("run"))
	if r := h.ask(http.MethodPost, at("/runs/%d/cancel", run.ID), ""); r.status != 200 {
		t.Fatalf("%s", r.body)
	}
	seen := s.until("end", named("end"))
	if last := seen[len(seen)-1].data; !strings.Contains(last, `"state":"cancelled"`) {
		t.Errorf("end carries %s", last)
	}
	s.ends()
}

// following counts the streams' goroutines by their stacks.
func following() int {
	buf := make([]byte, 1<<20)
	return strings.Count(string(buf[:runtime.Stack(buf, true)]), "(*follow).run(")
}

func waitFor(t *testing.T, what string, ok func() bool) {
	t.Helper()
	for deadline := time.Now().Add(10 * time.Second); !ok(); time.Sleep(5 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("never: %s", what)
		}
	}
}

func TestStreamsEndWithTheirClient(t *testing.T) {
	h := open(t, nil)
	run, _ := h.start()
	var streams []*stream
	for range 5 {
		s := h.follow(at("/runs/%d/events", run.ID))
		s.until("progress", named("run"))
		streams = append(streams, s)
	}
	if n := following(); n != 5 {
		t.Errorf("%d goroutines for 5 streams", n)
	}
	for _, s := range streams {
		s.leave()
	}
	waitFor(t, "all goroutines gone", func() bool { return following() == 0 && h.api.streams.Load() == 0 })
	if strings.Contains(h.log.String(), "level=ERROR") {
		t.Errorf("leaving is no error: %s", h.log)
	}
}

func TestStreamsEndWithTheServer(t *testing.T) {
	h := open(t, nil)
	run, _ := h.start()
	s := h.follow(at("/runs/%d/events", run.ID))
	s.until("progress", named("run"))
	h.hangUp()
	s.ends()
	waitFor(t, "goroutine gone", func() bool { return following() == 0 })
	h.closing() // would wait for open streams
}

func TestStreamsAreBounded(t *testing.T) {
	h := open(t, nil)
	run, _ := h.start()
	h.api.streams.Store(maxStreams)
	r := h.get(at("/runs/%d/events", run.ID))
	r.wantProblem(t, kindUnavailable, "open already")
	if n := h.api.streams.Load(); n != maxStreams {
		t.Errorf("count is %d after a refusal", n)
	}
}

func TestQuietStreamsArePinged(t *testing.T) {
	h := open(t, nil)
	h.api.pace.ping = 20 * time.Millisecond
	run, _ := h.start()
	s := h.follow(at("/runs/%d/events", run.ID))
	for range 2 {
		s.until("ping", func(e event) bool { return e.comment == "ping" })
	}
}

// deaf is a store that another machine writes to: its commits wake nobody here.
type deaf struct{ Store }

func (deaf) Changed() <-chan struct{} { return make(chan struct{}) }

func TestPollingFindsWhatNobodyTold(t *testing.T) {
	h := open(t, func(o *Options) { o.Store = deaf{o.Store} })
	h.api.pace.poll, h.api.pace.round = 20*time.Millisecond, time.Millisecond
	run, jobs := h.start()
	s := h.follow(at("/runs/%d/events", run.ID))
	s.until("progress", named("run"))
	h.finish(jobs[0], level.Done)
	s.until("the job", func(e event) bool { return strings.Contains(e.data, `"what":"done"`) })
}

// A burst of changes gives few progress events: one a round.
func TestProgressIsThrottled(t *testing.T) {
	h := open(t, nil)
	for i := range 60 {
		h.write(h.shelf.Root, fmt.Sprintf("burst/%d.wav", i), "x")
	}
	if _, err := (queue{h.db}).Scan(t.Context(), h.shelf.ID, ""); err != nil {
		t.Fatal(err)
	}
	h.api.pace.round = 100 * time.Millisecond
	run, jobs := h.start()
	s := h.follow(at("/runs/%d/events", run.ID))
	start := time.Now()
	for _, j := range jobs {
		h.finish(j, level.Done)
	}
	seen := s.until("end", named("end"))
	rounds := int(time.Since(start)/h.api.pace.round) + 2
	progress := 0
	for _, e := range seen {
		if e.name == "run" {
			progress++
		}
	}
	if progress > rounds || len(jobIDs(seen)) < 2*len(jobs) {
		t.Errorf("%d progress events in %d rounds, %d job events for %d jobs", progress, rounds, len(jobIDs(seen)), len(jobs))
	}
}

// Deadlines that suit ordinary requests must not end a stream.
func TestStreamsOutliveTheServersDeadlines(t *testing.T) {
	h := open(t, nil)
	h.api.pace.ping = 50 * time.Millisecond
	run, _ := h.start()
	router := gin.New()
	h.api.Register(router)
	server := httptest.NewUnstartedServer(router)
	server.Config.ReadTimeout, server.Config.WriteTimeout = 150*time.Millisecond, 150*time.Millisecond
	server.Start()
	defer server.Close()
	h.url = server.URL
	s := h.follow(at("/runs/%d/events", run.ID))
	defer s.leave()
	for range 10 { // half a second, more than three times the deadlines
		s.until("ping", func(e event) bool { return e.comment == "ping" })
	}
}

// failing is a store whose database fails once the stream is under way.
type failing struct {
	Store
	now atomic.Bool
}

func (f *failing) RunEvents(ctx context.Context, run, after int64, limit int) ([]store.Event, error) {
	if f.now.Load() {
		return nil, errDisk
	}
	return f.Store.RunEvents(ctx, run, after, limit)
}

// A stream that cannot go on is cut, not ended: the client must not believe that the run is over.
func TestStreamIsCutWhenTheStoreFails(t *testing.T) {
	var f failing
	h := open(t, func(o *Options) { f.Store = o.Store; o.Store = &f })
	run, jobs := h.start()
	resp, err := http.Get(h.url + at("/runs/%d/events", run.ID))
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	f.now.Store(true)
	h.finish(jobs[0], level.Done)
	body, err := io.ReadAll(resp.Body)
	if !errors.Is(err, io.ErrUnexpectedEOF) || strings.Contains(string(body), "event: end") {
		t.Errorf("ended with %v after %s", err, body)
	}
	waitFor(t, "a line in the log", func() bool { return following() == 0 })
	h.closing()
	if !strings.Contains(h.log.String(), "sector 7") {
		t.Errorf("the log does not tell the cause: %s", h.log)
	}
}
