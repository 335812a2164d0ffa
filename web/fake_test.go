package web

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"net/http"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// noon is the day the invented data is set on.
var noon = time.Date(2031, 5, 14, 12, 0, 0, 0, time.Local)

// fake is a store of invented recordings, and the parts of the JSON API that the scripts call.
type fake struct {
	shelfList []store.ShelfSummary
	recs      []store.Recording
	runList   []store.Run
	jobList   []store.Job
	attic     []store.Original
	profiles  []profile.Listed
	unusable  []gin.H     // files of the profiles folder
	asked     chan string // bodies of the runs that were asked for
	mu        sync.Mutex  // held where a restore changes what a page shows
	broken    error       // returned by every call when set
	apiDown   atomic.Bool // the spines answer with a problem
}

var (
	folders = []string{"ballads", "brass", "choir nights", "jingles", "late evening", "news beds", "strings", "talk"}
	firsts  = []string{"Amber", "Harbour", "Seven", "Paper", "Winter", "Copper", "Slow", "Glass", "Northern", "Quiet"}
	seconds = []string{"lanterns", "crossing", "letters", "orchard", "signal", "river", "staircase", "meadow", "clock"}
)

// hostile names have to come out as text, whole and harmless.
var hostile = []string{
	`brass/<img src=x onerror=alert(1)> & "quotes" 'n' {{.}}.wav`,
	"choir nights/תזמורת הערב - הקלטה מיוחדת.flac",
	"strings/" + strings.Repeat("a very long name that never seems to end ", 9) + ".wav",
}

// newFake invents a shelf of n recordings, most of them levelled by one run that is still at work.
func newFake(n int) *fake {
	rng := rand.New(rand.NewPCG(7, uint64(n)))
	f := &fake{asked: make(chan string, 9), profiles: profile.Gather("").All, unusable: []gin.H{}}
	run := store.Run{ID: 12, ShelfID: 1, ShelfName: "evening-music", Profile: "rotation", ProfileVersion: "5f0c2a91b3de", Target: -18, Tolerance: 0.3, Ceiling: -1,
		Delivery: store.Copy, State: store.RunWorking, CreatedAt: noon.Add(-40 * time.Minute), Jobs: n, BytesTotal: int64(n) * 41e6}
	started := noon.Add(-38 * time.Minute)
	run.StartedAt = &started
	sum := store.ShelfSummary{Shelf: store.Shelf{ID: 1, Name: "evening-music", Root: "/srv/radio/evening", Copies: "/srv/radio/evening-even",
		CreatedAt: noon.Add(-50 * time.Hour)}, Recordings: n}
	for i := range n {
		r, j := f.invent(rng, i, n)
		f.recs, f.jobList = append(f.recs, r), append(f.jobList, j)
		tally(&sum, &run, r)
	}
	slices.SortFunc(f.recs, func(a, b store.Recording) int { return cmp.Compare(a.Path, b.Path) })
	sum.LastRun = &run
	f.runList = []store.Run{run}
	f.shelfList = []store.ShelfSummary{sum}
	return f
}

// newReplaced is newFake(n) after a run that put its results in the originals' place, and has ended. The
// first recording's original was brought back since.
func newReplaced(n int) *fake {
	f := newFake(n)
	run := &f.runList[0]
	run.Delivery, run.State, run.FinishedAt = store.Replace, store.RunFinished, new(noon)
	for _, j := range f.jobList {
		if j.State == store.Done {
			f.attic = append(f.attic, store.Original{RecordingID: j.RecordingID, ShelfID: 1, RunID: run.ID, JobID: j.ID, Path: j.Path, KeptAt: noon.Add(-29 * time.Minute)})
		}
	}
	f.restore(f.attic[0].RecordingID)
	return f
}

// restore plays the worker that brings an original back.
func (f *fake) restore(id int64) bool {
	f.mu.Lock()
	defer f.mu.Unlock()
	kept := len(f.attic)
	f.attic = slices.DeleteFunc(f.attic, func(o store.Original) bool { return o.RecordingID == id })
	for i := range f.recs {
		if r := &f.recs[i]; r.ID == id {
			r.State, r.Reason, r.After = "", "", nil
		}
	}
	return len(f.attic) < kept
}

func (f *fake) Original(_ context.Context, id int64) (store.Original, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	return pick(f.broken, f.attic, func(o store.Original) bool { return o.RecordingID == id })
}

func (f *fake) Originals(_ context.Context, q store.OriginalQuery) ([]store.Original, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	var list []store.Original
	for _, o := range f.attic {
		if (q.RunID == 0 || o.RunID == q.RunID) && (q.ShelfID == 0 || o.ShelfID == q.ShelfID) && len(list) < q.Limit {
			list = append(list, o)
		}
	}
	return list, f.broken
}

func (f *fake) Versions(_ context.Context, q store.OriginalQuery) ([]store.Version, error) {
	if q.RecordingID != 2 || len(f.attic) == 0 {
		return nil, f.broken
	}
	return []store.Version{{RecordingID: 2, File: "/srv/radio/evening-even.attic/mine.0123456789ab.wav", KeptAt: noon.Add(-29 * time.Minute)}}, f.broken
}

func (f *fake) AtticOf(context.Context, int64) (store.AtticCount, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	n := len(f.attic)
	return store.AtticCount{Originals: n, Versions: min(n, 1), Bytes: int64(n) * 41e6}, f.broken
}

func (f *fake) KeptByOthers(context.Context, int64) ([]store.KeptBy, error) {
	if len(f.attic) == 0 {
		return nil, f.broken
	}
	return []store.KeptBy{{RunID: 13, Originals: 2}}, f.broken
}

func (f *fake) invent(rng *rand.Rand, i, n int) (store.Recording, store.Job) {
	folder := folders[i*len(folders)/max(n, 1)]
	path := fmt.Sprintf("%s/%s %s %03d.wav", folder, firsts[rng.IntN(len(firsts))], seconds[rng.IntN(len(seconds))], i+1)
	if n > 20 && i < len(hostile) {
		path = hostile[i]
	}
	lufs := -21 + 9*rng.NormFloat64()
	switch folder {
	case "brass", "jingles":
		lufs = -9 + 3*rng.NormFloat64()
	case "choir nights", "strings":
		lufs = -29 + 6*rng.NormFloat64()
	}
	lufs = min(max(lufs, -46), -5)
	spreadLU := 3 + 15*rng.Float64()*min(1, (-lufs)/25)
	length := 120 + 200*rng.Float64()
	before := &store.Figures{Integrated: &lufs, Range: new(spreadLU), TruePeak: new(min(lufs+9+7*rng.Float64(), 1.2*rng.Float64())),
		ShortTerm10: new(lufs - spreadLU*0.72), ShortTerm95: new(lufs + spreadLU*0.28)}
	r := store.Recording{ID: int64(i + 1), ShelfID: 1, ShelfName: "evening-music", Path: path, Size: 41e6, AddedAt: noon.Add(-49 * time.Hour),
		ModifiedAt: noon.Add(-99 * time.Hour), Format: "wav", Duration: &length, State: store.Done, Profile: "rotation", Before: before, JobID: int64(1000 + i)}
	j := store.Job{ID: r.JobID, RunID: 12, RecordingID: r.ID, Path: path, Attempts: 1, Before: before, Duration: &length, Profile: "rotation",
		ProfileVersion: "5f0c2a91b3de", StartedAt: new(noon.Add(-30 * time.Minute)), FinishedAt: new(noon.Add(-29 * time.Minute))}
	gain := -18 - lufs
	after := func(ceiling float64) *store.Figures {
		to := -18 + 0.12*rng.NormFloat64()
		s := min(spreadLU, 8)
		return &store.Figures{Integrated: &to, Range: &s, TruePeak: new(min(*before.TruePeak+gain, ceiling-0.3*rng.Float64())),
			ShortTerm10: new(to - s*0.72), ShortTerm95: new(to + s*0.28)}
	}
	j.Plan = &level.Plan{Gain: audio.DB(gain), Ceiling: -1, Limit: *before.TruePeak+gain > -1, Reason: "one gain to the target, peaks under the ceiling"}
	j.Output = path
	switch dice := rng.IntN(100); {
	case i%31 == 17:
		r.State, r.Reason = store.Held, "clipped at the source 214 times; the copy may sound harsh"
		r.Faults, r.After = 1, after(-1)
	case i%67 == 41:
		r.State, r.Reason, r.Before, r.Duration = store.Failed, "the file ends in the middle of its header", nil, nil
		j.Plan, j.Output = nil, ""
	case i%29 == 13:
		r.State, r.Profile, r.JobID = "", "", 0
	case n > 20 && dice < 4:
		r.State, j.FinishedAt = store.Waiting, nil
	case n > 20 && i%41 == 40:
		r.State, j.FinishedAt = store.Working, nil
	default:
		r.After = after(-1)
	}
	j.State, j.Reason, j.After, j.Before = r.State, r.Reason, r.After, r.Before
	inventTreatment(&j)
	return r, j
}

func tally(s *store.ShelfSummary, run *store.Run, r store.Recording) {
	low := func(at **float64, v *float64) {
		if v != nil && (*at == nil || *v < **at) {
			*at = v
		}
	}
	high := func(at **float64, v *float64) {
		if v != nil && (*at == nil || *v > **at) {
			*at = v
		}
	}
	if r.Before != nil {
		s.Measured++
		s.Duration += *r.Duration
		low(&s.Quietest, r.Before.Integrated)
		high(&s.Loudest, r.Before.Integrated)
	}
	if r.After != nil && r.State == store.Done {
		low(&s.QuietestAfter, r.After.Integrated)
		high(&s.LoudestAfter, r.After.Integrated)
		high(&s.HighestPeak, r.After.TruePeak)
	}
	switch r.State {
	case store.Done:
		s.Done, run.Done = s.Done+1, run.Done+1
	case store.Held:
		s.Held, run.Held = s.Held+1, run.Held+1
	case store.Failed:
		s.Failed, run.Failed = s.Failed+1, run.Failed+1
	case store.Working:
		run.Working++
	case store.Waiting:
		run.Waiting++
	default:
		run.Jobs--
		return
	}
	if r.State == store.Done || r.State == store.Held {
		run.SecondsDone += *r.Duration
		run.BytesDone += r.Size
	}
}

func (f *fake) Shelves(context.Context) ([]store.ShelfSummary, error) { return f.shelfList, f.broken }

func (f *fake) Shelf(_ context.Context, id int64) (store.ShelfSummary, error) {
	return pick(f.broken, f.shelfList, func(s store.ShelfSummary) bool { return s.ID == id })
}

func (f *fake) Recording(_ context.Context, id int64) (store.Recording, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	return pick(f.broken, f.recs, func(r store.Recording) bool { return r.ID == id })
}

func (f *fake) Run(_ context.Context, id int64) (store.Run, error) {
	return pick(f.broken, f.runList, func(r store.Run) bool { return r.ID == id })
}

func (f *fake) Runs(context.Context, int, int64) ([]store.Run, error) { return f.runList, f.broken }

func pick[T any](broken error, all []T, is func(T) bool) (T, error) {
	i := slices.IndexFunc(all, is)
	if broken != nil || i < 0 {
		return *new(T), cmp.Or(broken, fmt.Errorf("invented data: %w", store.ErrNotFound))
	}
	return all[i], nil
}

func (f *fake) Recordings(_ context.Context, q store.RecordingQuery) (store.RecordingPage, error) {
	var p store.RecordingPage
	from, _ := strconv.Atoi(q.Cursor)
	for _, r := range f.recs {
		state := cmp.Or(q.State, r.State)
		if q.State == "never" {
			state = ""
		}
		if r.State != state || !strings.Contains(strings.ToLower(r.Path), strings.ToLower(q.Search)) || !strings.HasPrefix(r.Path, q.Folder) {
			continue
		}
		if p.Total >= from && len(p.Recordings) < q.Limit {
			p.Recordings = append(p.Recordings, r)
		}
		p.Total++
	}
	if from+len(p.Recordings) < p.Total {
		p.Next = strconv.Itoa(from + len(p.Recordings))
	}
	return p, f.broken
}

func (f *fake) Jobs(_ context.Context, q store.JobQuery) ([]store.Job, error) {
	var jobs []store.Job
	for _, j := range f.jobList {
		if j.State != "" && (q.State == "" || j.State == q.State) && j.ID > q.After && len(jobs) < q.Limit {
			jobs = append(jobs, j)
		}
	}
	return jobs, f.broken
}

func (f *fake) HeldFor(_ context.Context, ids []int64) (map[int64][]level.Doubt, error) {
	doubts := map[int64][]level.Doubt{}
	for _, j := range f.jobList {
		if slices.Contains(ids, j.RecordingID) && len(j.Doubts) > 0 {
			doubts[j.RecordingID] = j.Doubts
		}
	}
	return doubts, f.broken
}

func (f *fake) RecordingJobs(_ context.Context, id int64) ([]store.Job, error) {
	i := slices.IndexFunc(f.jobList, func(j store.Job) bool { return j.RecordingID == id })
	if i < 0 || f.jobList[i].State == "" {
		return nil, f.broken
	}
	return f.jobList[i : i+1], f.broken
}

func (f *fake) RecordingHistory(_ context.Context, id int64) ([]store.Event, error) {
	events := []store.Event{
		{ID: 1, At: noon.Add(-49 * time.Hour), RecordingID: id, What: "found", Words: "found on the shelf"},
		{ID: 2, At: noon.Add(-29 * time.Minute), RunID: 12, RecordingID: id, What: "done", Words: "levelled with rotation by run 12"},
	}
	r, err := f.Recording(context.Background(), id)
	if err == nil && r.State == "" && f.runList[0].Delivery == store.Replace {
		events = append(events, store.Event{ID: 3, At: noon.Add(-time.Minute), RecordingID: id, What: "restored", Words: "the original is back, bit for bit"})
	}
	return events, f.broken
}

// api mounts what the scripts call.
func (f *fake) api(r gin.IRouter) {
	g := r.Group("/api/v1")
	g.GET("/shelves/:id/spines", func(c *gin.Context) {
		if f.apiDown.Load() {
			c.Data(503, "application/problem+json", []byte(`{"title":"busy","detail":"The database is being copied. Try again in a minute."}`))
			return
		}
		rows := make([][]any, len(f.recs))
		for i, r := range f.recs {
			b, a := r.Before, r.After
			if b == nil {
				b = &store.Figures{}
			}
			if a == nil {
				a = &store.Figures{}
			}
			rows[i] = []any{r.ID, r.Path, r.State, b.Integrated, b.ShortTerm10, b.ShortTerm95, b.TruePeak, a.Integrated, a.ShortTerm10, a.ShortTerm95, a.TruePeak}
		}
		c.JSON(200, gin.H{"target_lufs": -18, "rows": rows, "columns": []string{"id", "path", "state", "before_lufs", "before_p10",
			"before_p95", "before_peak", "after_lufs", "after_p10", "after_p95", "after_peak"}})
	})
	g.GET("/profiles", func(c *gin.Context) {
		all := []profile.Described{}
		for _, l := range f.profiles {
			all = append(all, l.Described())
		}
		c.JSON(200, gin.H{"profiles": all, "problems": f.unusable})
	})
	g.POST("/runs", func(c *gin.Context) {
		body, _ := c.GetRawData()
		f.asked <- string(body)
		c.JSON(201, f.runList[0])
	})
	g.POST("/recordings/:id/restore", func(c *gin.Context) {
		n, _ := strconv.ParseInt(c.Param("id"), 10, 64)
		if f.apiDown.Load() || !f.restore(n) {
			c.Data(409, "application/problem+json", []byte(`{"title":"state","detail":"The file was changed since it was levelled."}`))
			return
		}
		c.JSON(200, f.recs[0])
	})
	g.GET("/attic", func(c *gin.Context) {
		after, _ := strconv.ParseInt(c.Query("after"), 10, 64)
		f.mu.Lock()
		defer f.mu.Unlock()
		page := []store.Original{}
		for _, o := range f.attic {
			if o.RecordingID > after && len(page) < 5 && (c.Query("run") == "12" || c.Query("shelf") == "1") {
				page = append(page, o)
			}
		}
		c.JSON(200, gin.H{"originals": page})
	})
	g.POST("/shelves/:id/scan", func(c *gin.Context) { c.JSON(200, store.ScanResult{Found: len(f.recs)}) })
	g.GET("/recordings/:id/timeline", func(c *gin.Context) {
		n, _ := strconv.ParseInt(c.Param("id"), 10, 64)
		r, err := f.Recording(c, n)
		if err != nil {
			c.Status(404)
			return
		}
		c.JSON(200, gin.H{"step_s": 0.1, "before": course(r.ID, r.Before, r.Duration), "after": course(r.ID, r.After, r.Duration), "ride": f.ride(r)})
	})
	g.GET("/recordings/:id/sound", func(c *gin.Context) {
		http.ServeContent(c.Writer, c.Request, "tone.wav", noon, bytes.NewReader(tone()))
	})
	g.GET("/runs/:id/events", func(c *gin.Context) {
		c.Header("Content-Type", "text/event-stream")
		b, _ := json.Marshal(f.runList[0])
		fmt.Fprintf(c.Writer, "event: run\ndata: %s\n\n", b)
		c.Writer.Flush()
		<-c.Request.Context().Done()
	})
}
