package api

import (
	"context"
	"errors"
	"math"
	"net/http"
	"strconv"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/store"
)

func (a *API) listRecordings(c *gin.Context) (int, any, error) {
	q, err := queryOf(c)
	if err != nil {
		return 0, nil, err
	}
	folder, err := folderOf(q.text("folder"))
	if err != nil {
		q.complain("folder", "%s", err)
	}
	asked := store.RecordingQuery{
		ShelfID: q.number("shelf", 1, maxID),
		RunID:   q.number("run", 1, maxID),
		Folder:  folder,
		State:   store.JobState(q.choice("state", append(jobStates(), "never")...)),
		Search:  q.text("q"),
		Sort:    q.choice("sort", "path", "added", "state", "duration", "before", "after", "range", "peak"),
		Desc:    q.choice("order", "asc", "desc") == "desc",
		Limit:   int(q.number("limit", 1, pageLimit)),
		Cursor:  q.text("cursor"),
	}
	if err := q.err(); err != nil {
		return 0, nil, err
	}
	page, err := a.Store.Recordings(c.Request.Context(), asked)
	page.Recordings = list(page.Recordings)
	return http.StatusOK, page, err
}

const (
	maxID     = 1<<63 - 1
	pageLimit = 1000
)

func jobStates() []string {
	return []string{string(store.Waiting), string(store.Working), string(store.Done),
		string(store.Held), string(store.Failed), string(store.Cancelled)}
}

// recordingDetail is everything known about one recording.
type recordingDetail struct {
	Recording store.Recording `json:"recording"`
	Before    *store.Reading  `json:"before"`
	After     *store.Reading  `json:"after"`
	Jobs      []store.Job     `json:"jobs"`
	History   []store.Event   `json:"history"`
	Original  *store.Original `json:"original"` // in the attic; nil if none is there
	Versions  []store.Version `json:"versions"` // what else of it is there
}

func (a *API) showRecording(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	var d recordingDetail
	if d.Recording, err = a.Store.Recording(ctx, id); err != nil {
		return 0, nil, err
	}
	if d.Before, d.After, err = a.Store.Readings(ctx, id); err != nil {
		return 0, nil, err
	}
	if d.Jobs, err = a.Store.RecordingJobs(ctx, id); err != nil {
		return 0, nil, err
	}
	if d.History, err = a.Store.RecordingHistory(ctx, id); err != nil {
		return 0, nil, err
	}
	if d.Original, err = a.original(ctx, id); err != nil {
		return 0, nil, err
	}
	if d.Versions, err = a.Store.Versions(ctx, store.OriginalQuery{RecordingID: id, Limit: 1}); err != nil {
		return 0, nil, err
	}
	d.Jobs, d.History, d.Versions = list(d.Jobs), list(d.History), list(d.Versions)
	return http.StatusOK, d, nil
}

// timeline is the course of a recording before and after, on a common grid.
type timeline struct {
	Step   float64 `json:"step_s"`
	Before *curves `json:"before"`
	After  *curves `json:"after"`
	Ride   *gain   `json:"ride"` // null if the gain stood still
}

// gain is what was done to the sound of the after reading: the ride, and the steady gain on top of it.
type gain struct {
	Ride   gains    `json:"gain_db"` // value i holds at i × step
	Steady audio.DB `json:"steady_db"`
}

type curves struct {
	ShortTerm curve `json:"short_term"` // LUFS
	Momentary curve `json:"momentary"`  // LUFS
	Peak      curve `json:"peak"`       // dBFS
	// Where programme is heard, and how likely it is speech; null if that was not looked for.
	Active []bool   `json:"active"`
	Speech percents `json:"speech"`
}

// curve is a series of levels; in JSON each has one decimal, and silence is null.
type curve []float32

// MarshalJSON writes the series compactly: an hour has 36,000 values in each of six of them.
func (v curve) MarshalJSON() ([]byte, error) { return appendSeries(v, 10), nil }

// gains is a series of gains; in JSON each has two decimals, as finely as a ride is solved.
type gains []float32

// MarshalJSON writes the series compactly.
func (v gains) MarshalJSON() ([]byte, error) { return appendSeries(v, 100), nil }

func appendSeries(v []float32, steps float64) []byte {
	b := append(make([]byte, 0, 2+6*len(v)), '[')
	for i, x := range v {
		if i > 0 {
			b = append(b, ',')
		}
		b = appendRounded(b, float64(x), steps)
	}
	return append(b, ']')
}

// percents is a series of shares of 1; in JSON each is a whole percent, and a nil series is null.
type percents []float32

// MarshalJSON writes the series compactly.
func (v percents) MarshalJSON() ([]byte, error) {
	if v == nil {
		return []byte("null"), nil
	}
	b := append(make([]byte, 0, 2+3*len(v)), '[')
	for i, x := range v {
		if i > 0 {
			b = append(b, ',')
		}
		b = strconv.AppendInt(b, int64(math.Round(100*float64(x))), 10)
	}
	return append(b, ']'), nil
}

func (a *API) showTimeline(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	if _, err := a.Store.Recording(ctx, id); err != nil {
		return 0, nil, err
	}
	before, after, err := a.Store.Readings(ctx, id)
	if err != nil {
		return 0, nil, err
	}
	t := timeline{Step: 0.1} // the meter's grid, also where there is no reading yet
	if t.Before, err = a.curvesOf(ctx, before, &t.Step); err != nil {
		return 0, nil, err
	}
	if t.After, err = a.curvesOf(ctx, after, &t.Step); err != nil {
		return 0, nil, err
	}
	if t.Ride, err = a.gainOf(ctx, after); err != nil {
		return 0, nil, err
	}
	return http.StatusOK, t, nil
}

// gainOf fetches the ride that led to an after reading; nil if there is no reading or no ride.
func (a *API) gainOf(ctx context.Context, after *store.Reading) (*gain, error) {
	if after == nil {
		return nil, nil
	}
	plan, err := a.Store.Plan(ctx, after.JobID)
	if err != nil || plan == nil || plan.Ride == nil {
		return nil, err
	}
	return &gain{gains(plan.Ride.Gain), plan.Gain}, nil
}

// curvesOf fetches a reading's timeline; nil if there is no reading or none was kept with it.
func (a *API) curvesOf(ctx context.Context, r *store.Reading, step *float64) (*curves, error) {
	if r == nil {
		return nil, nil
	}
	tl, err := a.Store.Timeline(ctx, r.ID)
	if errors.Is(err, store.ErrNotFound) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	if tl.Step > 0 {
		*step = tl.Step
	}
	return &curves{tl.ShortTerm, tl.Momentary, tl.Peak, tl.Active, tl.Speech}, nil
}
