package api

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"strconv"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

// pace is how fast an event stream runs.
type pace struct {
	round time.Duration // shortest time between two looks at the store
	poll  time.Duration // longest: a second machine's commits do not wake us
	ping  time.Duration // longest silence, so that proxies and clients see a living connection
	batch int           // events read and sent at a time
}

var defaultPace = pace{round: 250 * time.Millisecond, poll: time.Second, ping: 15 * time.Second, batch: 500}

// maxStreams bounds the open event streams; each asks the store a few questions a second.
const maxStreams = 200

// follow is a run's event stream, as the WHATWG HTML standard defines server-sent events. One goroutine, the
// request's own, reads from the store and writes to the client: a slow client holds back itself and no one
// else, and nothing is left behind when it goes.
//
// Events: job (a store.Event, with its id), run (the run's progress, at most once a round), end (the run as
// it ended; the stream closes). The client should close its side on end, or it will connect again.
type follow struct {
	*API
	runID, after int64
}

func (a *API) followRun(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	q, err := queryOf(c)
	if err != nil {
		return 0, nil, err
	}
	after := q.number("after", 0, maxID)
	if err := q.err(); err != nil {
		return 0, nil, err
	}
	if last := c.GetHeader("Last-Event-ID"); last != "" { // newer than the address: it comes with a reconnect
		if after, err = strconv.ParseInt(last, 10, 64); err != nil || after < 0 {
			return 0, nil, badRequest("", complaint{"Last-Event-ID", fmt.Sprintf("%q is not the id of an event", last)})
		}
	}
	if _, err := a.Store.Run(c.Request.Context(), id); err != nil {
		return 0, nil, err
	}
	return http.StatusOK, &follow{a, id, after}, nil
}

func (f *follow) send(c *gin.Context, status int) error {
	if f.streams.Add(1) > maxStreams {
		f.streams.Add(-1)
		return unavailable(fmt.Sprintf("%d event streams are open already", maxStreams))
	}
	defer f.streams.Add(-1)
	c.Header("Content-Type", "text/event-stream")
	c.Header("Cache-Control", "no-store")
	c.Header("X-Accel-Buffering", "no") // some reverse proxies buffer otherwise
	c.Status(status)
	out := &eventWriter{to: patient(c)}
	if err := out.flush(); err != nil {
		return err
	}
	return f.run(c.Request.Context(), out)
}

// run sends rounds of news until the run has ended and everything about it has been sent.
func (f *follow) run(ctx context.Context, out *eventWriter) error {
	ping := time.NewTicker(f.pace.ping)
	defer ping.Stop()
	var shown []byte
	for {
		start := time.Now()
		changed := f.Store.Changed() // taken before looking, or a commit in between would be missed
		run, err := f.Store.Run(ctx, f.runID)
		if err != nil {
			return err
		}
		if err := f.news(ctx, out); err != nil {
			return err
		}
		progress, err := json.Marshal(run)
		if err != nil {
			return err
		}
		ended := run.State == store.RunFinished || run.State == store.RunCancelled
		if ended { // the state was read before the events: nothing can follow them
			out.event("run", 0, progress)
			out.event("end", 0, progress)
			return out.flush()
		}
		if !bytes.Equal(progress, shown) {
			shown = progress
			out.event("run", 0, progress)
			if err := out.flush(); err != nil {
				return err
			}
		}
		if err := f.wait(ctx, out, changed, ping.C, start); err != nil {
			return err
		}
	}
}

// news sends all events after the last one sent, batch by batch.
func (f *follow) news(ctx context.Context, out *eventWriter) error {
	for {
		events, err := f.Store.RunEvents(ctx, f.runID, f.after, f.pace.batch)
		if err != nil || len(events) == 0 {
			return err
		}
		for _, e := range events {
			data, err := json.Marshal(e)
			if err != nil {
				return err
			}
			out.event("job", e.ID, data)
			f.after = e.ID
		}
		if err := out.flush(); err != nil {
			return err
		}
		if len(events) < f.pace.batch {
			return nil
		}
	}
}

// wait returns when there may be news and the round is over; it pings meanwhile.
func (f *follow) wait(ctx context.Context, out *eventWriter, changed <-chan struct{}, ping <-chan time.Time, start time.Time) error {
	poll := time.NewTimer(f.pace.poll)
	defer poll.Stop()
	for {
		select {
		case <-ctx.Done():
			return context.Cause(ctx)
		case <-ping:
			out.buf.WriteString(": ping\n\n")
			if err := out.flush(); err != nil {
				return err
			}
			continue
		case <-changed:
		case <-poll.C:
		}
		break
	}
	rest := time.NewTimer(time.Until(start.Add(f.pace.round)))
	defer rest.Stop()
	select {
	case <-ctx.Done():
		return context.Cause(ctx)
	case <-rest.C:
		return nil
	}
}

// eventWriter gathers events and sends them together.
type eventWriter struct {
	to  patientWriter
	buf bytes.Buffer
}

// event adds one event; data is one line of JSON, id 0 means none.
func (w *eventWriter) event(name string, id int64, data []byte) {
	fmt.Fprintf(&w.buf, "event: %s\n", name)
	if id != 0 {
		fmt.Fprintf(&w.buf, "id: %d\n", id)
	}
	fmt.Fprintf(&w.buf, "data: %s\n\n", data)
}

func (w *eventWriter) flush() error {
	if w.buf.Len() > 0 {
		if _, err := w.to.Write(w.buf.Bytes()); err != nil {
			return err
		}
		w.buf.Reset()
	}
	return w.to.rc.Flush()
}
