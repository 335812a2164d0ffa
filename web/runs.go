package web

import (
	"fmt"
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

const (
	pageOfRuns = 50
	pageOfJobs = 100
)

// runView is a run with what follows from its counts.
type runView struct {
	store.Run
	Parts    []part
	Ended    int    // done, held, failed or cancelled
	Reached  int    // those of them that had their turn: all but the cancelled
	Delivers string // what is written and where that goes, in words
	Pace     string // audio done in a minute, in words; "" while not known
	Left     string // time left in words, "" while not known or when finished
	Going    bool   // waiting or working
	Measures bool   // nothing is levelled, so there is no after
}

// part is one state's stretch of the progress bar, in thousandths of its length.
type part struct {
	State    store.JobState
	Jobs     int
	X, Width string
}

func viewRun(r store.Run, now time.Time) runView {
	v := runView{Run: r, Delivers: deliveryWords(r)}
	v.Reached = r.Done + r.Held + r.Failed
	v.Ended = v.Reached + r.Cancelled
	v.Going = going(r.State)
	v.Measures = !r.Delivery.Levels()
	at := 0.0
	for _, p := range []part{
		{State: store.Done, Jobs: r.Done}, {State: store.Held, Jobs: r.Held}, {State: store.Failed, Jobs: r.Failed},
		{State: store.Cancelled, Jobs: r.Cancelled}, {State: store.Working, Jobs: r.Working}, {State: store.Waiting, Jobs: r.Waiting},
	} {
		wide := 0.0
		if r.Jobs > 0 {
			wide = 1000 * float64(p.Jobs) / float64(r.Jobs)
		}
		gap := min(2, wide/4) // so that two outlines do not meet
		p.X, p.Width = strconv.FormatFloat(at+gap/2, 'f', 2, 64), strconv.FormatFloat(wide-gap, 'f', 2, 64)
		at += wide
		v.Parts = append(v.Parts, p)
	}
	v.pace(now)
	return v
}

func going(s store.RunState) bool { return s == store.RunWaiting || s == store.RunWorking }

// pace works out speed and time left. Bytes foretell the time left, as they are known before a file is opened.
func (v *runView) pace(now time.Time) {
	if v.StartedAt == nil {
		return
	}
	end := now
	if v.FinishedAt != nil {
		end = *v.FinishedAt
	}
	took := end.Sub(*v.StartedAt).Seconds()
	if took < 1 || v.Ended == 0 {
		return
	}
	if minutes := v.SecondsDone / took; minutes < 60 {
		v.Pace = audio.Number(minutes, 1) + " minutes"
	} else {
		v.Pace = audio.Number(minutes/60, 1) + " hours"
	}
	if v.Going && v.BytesDone > 0 && v.BytesTotal > v.BytesDone {
		v.Left = about(took * float64(v.BytesTotal-v.BytesDone) / float64(v.BytesDone))
	}
}

// about rounds a forecast to what it is worth.
func about(s float64) string {
	switch {
	case s < 50:
		return "less than a minute left"
	case s < 90*60:
		return fmt.Sprintf("about %s left", plural(int(s/60+0.5), "minute", "minutes"))
	}
	return fmt.Sprintf("about %s left", plural(int(s/3600+0.5), "hour", "hours"))
}

type runsPage struct {
	Runs []runView
	Next string
}

func (s *Site) runs(c *gin.Context) {
	before, err := strconv.ParseInt(c.Query("before"), 10, 64)
	if err != nil || before < 0 {
		before = 0
	}
	all, err := s.store.Runs(c.Request.Context(), pageOfRuns, before)
	if err != nil {
		s.fail(c, err)
		return
	}
	var p runsPage
	for _, r := range all {
		p.Runs = append(p.Runs, viewRun(r, s.now()))
	}
	if len(all) == pageOfRuns {
		p.Next = fmt.Sprintf("/runs?before=%d", all[len(all)-1].ID)
	}
	s.render(c, http.StatusOK, "runs", p)
}

// restoreAll asks whether all that the attic has of a run or a shelf is to be brought back.
type restoreAll struct {
	Of   string // "run" or "shelf"
	ID   int64
	Asks string
}

// bitRates are those a run can ask for, kbit/s; 0, the profile's own, is not among them.
func bitRates() []int {
	for _, f := range profile.Fields() {
		if f.Name == "delivered.bit_rate_kbps" {
			return slices.DeleteFunc(slices.Clone(f.Numbers), func(n int) bool { return n == 0 })
		}
	}
	return nil
}

type runPage struct {
	runView
	List    []store.Job
	AtWork  []store.Job
	Attic   bool           // originals that the run replaced are in the attic
	Others  []store.KeptBy // runs that the originals of its recordings are kept for
	Filters []filter
	Only    store.JobState // the state the list is narrowed to
	First   string
	Next    string
}

// filter is a link that narrows the list of jobs to one state.
type filter struct {
	Label string
	State store.JobState
	Jobs  int
	Href  string
	Here  bool
}

func (s *Site) run(c *gin.Context) {
	n, err := id(c)
	if err != nil {
		s.fail(c, err)
		return
	}
	p, err := s.findRun(c, n)
	if err != nil {
		s.fail(c, err)
		return
	}
	s.render(c, http.StatusOK, "run", p)
}

func (s *Site) findRun(c *gin.Context, n int64) (p runPage, err error) {
	ctx := c.Request.Context()
	r, err := s.store.Run(ctx, n)
	if err != nil {
		return p, err
	}
	p.runView = viewRun(r, s.now())
	p.Filters = []filter{{Label: "all", Jobs: r.Jobs}}
	for _, part := range p.Parts {
		p.Filters = append(p.Filters, filter{Label: string(part.State), State: part.State, Jobs: part.Jobs})
	}
	for i, f := range p.Filters {
		if c.Query("state") == string(f.State) {
			p.Only, p.Filters[i].Here = f.State, true
		}
		p.Filters[i].Href = jobsURL(n, f.State, 0)
	}
	after, err := strconv.ParseInt(c.Query("after"), 10, 64)
	if err != nil || after < 0 {
		after = 0
	}
	if p.List, err = s.store.Jobs(ctx, store.JobQuery{RunID: n, State: p.Only, After: after, Limit: pageOfJobs}); err != nil {
		return p, err
	}
	if p.Going && r.Working > 0 {
		if p.AtWork, err = s.store.Jobs(ctx, store.JobQuery{RunID: n, State: store.Working, Limit: 12}); err != nil {
			return p, err
		}
	}
	if r.Delivery.Writes() {
		kept, err := s.store.Originals(ctx, store.OriginalQuery{RunID: n, Limit: 1})
		if err != nil {
			return p, err
		}
		p.Attic = len(kept) > 0
		if p.Others, err = s.store.KeptByOthers(ctx, n); err != nil {
			return p, err
		}
	}
	if after > 0 {
		p.First = jobsURL(n, p.Only, 0)
	}
	if len(p.List) == pageOfJobs {
		p.Next = jobsURL(n, p.Only, p.List[pageOfJobs-1].ID)
	}
	return p, nil
}

func jobsURL(run int64, state store.JobState, after int64) string {
	v := url.Values{}
	if state != "" {
		v.Set("state", string(state))
	}
	if after > 0 {
		v.Set("after", strconv.FormatInt(after, 10))
	}
	u := fmt.Sprintf("/runs/%d", run)
	if len(v) > 0 {
		u += "?" + v.Encode()
	}
	return u
}
