package web

import (
	"context"
	"errors"
	"net/http"
	"net/url"
	"strconv"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/level"
	"evenshelf/store"
)

const pageOfRecordings = 100

// column is a table heading: a link that sorts by it, or turns the order round when it already does.
type column struct {
	Key, Label, Title string
	Number            bool
	Order             string // aria-sort: ascending, descending or none
	Href              string
}

type choice struct {
	Value, Label string
	Chosen       bool
}

type recordingsPage struct {
	store.RecordingPage
	Query   store.RecordingQuery
	Columns []column
	Shelves []choice
	States  []choice
	Run     *store.Run
	Doubts  map[int64][]level.Doubt // why recordings are held
	Narrow  bool                    // something is filtered
	First   string                  // address of the first page, "" on it
	Next    string
}

// headings of the table. An empty key cannot be sorted by.
var headings = []column{
	{Key: "path", Label: "Recording"},
	{Key: "duration", Label: "Length", Number: true},
	{Label: "Spine", Title: "before, hollow, above after, filled; from −50 LUFS at the left to 0 at the right"},
	{Key: "before", Label: "Before", Title: "integrated loudness as it arrived, LUFS", Number: true},
	{Key: "after", Label: "After", Title: "integrated loudness of the delivered file, LUFS", Number: true},
	{Key: "range", Label: "Range", Title: "loudness range as it arrived → delivered, LU", Number: true},
	{Key: "peak", Label: "True peak", Title: "true peak as it arrived → delivered, dBTP", Number: true},
	{Key: "state", Label: "State"},
}

func (s *Site) recordings(c *gin.Context) {
	ctx, q := c.Request.Context(), recordingQuery(c)
	p := recordingsPage{Query: q, Narrow: q.ShelfID != 0 || q.RunID != 0 || q.Folder != "" || q.State != "" || q.Search != ""}
	var err error
	if p.RecordingPage, err = s.store.Recordings(ctx, q); err != nil {
		s.fail(c, err)
		return
	}
	if p.Doubts, err = s.heldFor(ctx, p.Recordings); err != nil {
		s.fail(c, err)
		return
	}
	shelves, err := s.store.Shelves(ctx)
	if err != nil {
		s.fail(c, err)
		return
	}
	if q.RunID != 0 {
		run, err := s.store.Run(ctx, q.RunID)
		if err != nil {
			s.fail(c, err)
			return
		}
		p.Run = &run
	}
	p.Shelves = []choice{{"", "all shelves", q.ShelfID == 0}}
	for _, sh := range shelves {
		p.Shelves = append(p.Shelves, choice{strconv.FormatInt(sh.ID, 10), sh.Name, sh.ID == q.ShelfID})
	}
	for _, st := range []store.JobState{"", "never", store.Waiting, store.Working, store.Done, store.Held, store.Failed, store.Cancelled} {
		label := stateWords(st)
		switch st {
		case "":
			label = "any state"
		case "never":
			label = stateWords("")
		}
		p.States = append(p.States, choice{string(st), label, st == q.State})
	}
	for _, h := range headings {
		if h.Key != "" {
			desc := q.Sort == h.Key && !q.Desc
			h.Href = recordingsURL(q, h.Key, desc, "")
			h.Order = "none"
			if q.Sort == h.Key {
				h.Order = map[bool]string{false: "ascending", true: "descending"}[q.Desc]
			}
		}
		p.Columns = append(p.Columns, h)
	}
	if q.Cursor != "" {
		p.First = recordingsURL(q, q.Sort, q.Desc, "")
	}
	if p.RecordingPage.Next != "" {
		p.Next = recordingsURL(q, q.Sort, q.Desc, p.RecordingPage.Next)
	}
	s.render(c, http.StatusOK, "recordings", p)
}

// heldFor asks why those recordings are held that are.
func (s *Site) heldFor(ctx context.Context, list []store.Recording) (map[int64][]level.Doubt, error) {
	var ids []int64
	for _, r := range list {
		if r.State == store.Held {
			ids = append(ids, r.ID)
		}
	}
	if ids == nil {
		return nil, nil
	}
	return s.store.HeldFor(ctx, ids)
}

// recordingQuery reads the address. What makes no sense there is left out rather than refused: an address is
// typed, kept and shared.
func recordingQuery(c *gin.Context) store.RecordingQuery {
	number := func(key string) int64 {
		n, err := strconv.ParseInt(c.Query(key), 10, 64)
		if err != nil || n < 0 {
			return 0
		}
		return n
	}
	q := store.RecordingQuery{
		ShelfID: number("shelf"), RunID: number("run"), Folder: c.Query("folder"), Search: c.Query("q"),
		Sort: "path", Desc: c.Query("order") == "desc", Limit: pageOfRecordings, Cursor: c.Query("cursor"),
	}
	switch st := store.JobState(c.Query("state")); st {
	case "never", store.Waiting, store.Working, store.Done, store.Held, store.Failed, store.Cancelled:
		q.State = st
	}
	for _, h := range headings {
		if h.Key != "" && h.Key == c.Query("sort") {
			q.Sort = h.Key
		}
	}
	return q
}

// recordingsURL is the address of a page of q in another order or at another place.
func recordingsURL(q store.RecordingQuery, sort string, desc bool, cursor string) string {
	v := url.Values{}
	set := func(key, value string) {
		if value != "" && value != "0" {
			v.Set(key, value)
		}
	}
	set("shelf", strconv.FormatInt(q.ShelfID, 10))
	set("run", strconv.FormatInt(q.RunID, 10))
	set("folder", q.Folder)
	set("state", string(q.State))
	set("q", q.Search)
	if sort != "path" {
		set("sort", sort)
	}
	if desc {
		set("order", "desc")
	}
	set("cursor", cursor)
	if len(v) == 0 {
		return "/recordings"
	}
	return "/recordings?" + v.Encode()
}

type recordingPage struct {
	store.Recording
	Told          string
	BeforeReading *store.Reading
	AfterReading  *store.Reading
	Target        *float64 // of the run that levelled it last
	Ceiling       *float64 // what the last plan rendered to, else the profile's
	Run           *store.Run
	Last          *store.Job
	Levelled      *store.Job // the one that made what the after reading is of
	Jobs          []store.Job
	History       []store.Event
	Original      *store.Original // in the attic; nil if none is there
	OnlyTagged    bool            // what took its place differs in its gain tags alone
	Versions      []store.Version // what else of it is in the attic
}

func (s *Site) recording(c *gin.Context) {
	n, err := id(c)
	if err != nil {
		s.fail(c, err)
		return
	}
	p, err := s.findRecording(c, n)
	if err != nil {
		s.fail(c, err)
		return
	}
	s.render(c, http.StatusOK, "recording", p)
}

func (s *Site) findRecording(c *gin.Context, n int64) (p recordingPage, err error) {
	ctx := c.Request.Context()
	if p.Recording, err = s.store.Recording(ctx, n); err != nil {
		return p, err
	}
	if p.BeforeReading, p.AfterReading, err = s.store.Readings(ctx, n); err != nil {
		return p, err
	}
	if p.Jobs, err = s.store.RecordingJobs(ctx, n); err != nil {
		return p, err
	}
	if p.History, err = s.store.RecordingHistory(ctx, n); err != nil {
		return p, err
	}
	switch original, err := s.store.Original(ctx, n); {
	case err == nil:
		p.Original = &original
		by, err := s.store.Run(ctx, original.RunID)
		if err != nil {
			return p, err
		}
		p.OnlyTagged = tagged(&by)
	case !errors.Is(err, store.ErrNotFound):
		return p, err
	}
	if p.Versions, err = s.store.Versions(ctx, store.OriginalQuery{RecordingID: n, Limit: 1}); err != nil {
		return p, err
	}
	for i := range p.Jobs {
		if p.Jobs[i].ID == p.JobID {
			p.Last = &p.Jobs[i]
		}
	}
	p.Levelled = levelledBy(p.AfterReading, p.Jobs)
	if p.Last != nil {
		run, err := s.store.Run(ctx, p.Last.RunID)
		if err != nil {
			return p, err
		}
		p.Run = &run
		aimed := run // what the after reading is to be held against: a later run may only have written tags
		if p.Levelled != nil && p.Levelled.RunID != run.ID {
			if aimed, err = s.store.Run(ctx, p.Levelled.RunID); err != nil {
				return p, err
			}
		}
		p.Target = &aimed.Target
		p.Ceiling = known(aimed.Ceiling)
	}
	p.Told = told(p.Recording, p.Run, p.Last)
	return p, nil
}
