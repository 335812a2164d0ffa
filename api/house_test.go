package api

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io"
	"io/fs"
	"log/slog"
	"math"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/ride"
	"evenshelf/engine/speech"
	"evenshelf/store"
)

// house is a whole service on a real port over a real database. Only the workers are played by the test: it
// scans by file name and finishes jobs with figures of its own.
type house struct {
	t       *testing.T
	db      *store.Store
	api     *API
	url     string
	hangUp  context.CancelFunc // what main does first when it shuts down
	shelf   store.Shelf        // "music", with two recordings
	inbox   store.Shelf        // "uploads"
	copies  string             // Options.CopiesDir
	log     *bytes.Buffer
	closing func()
}

const (
	quietSong = "evening/Quiet Song.wav"
	loudSong  = "evening/Лодка.flac"
)

// arrived is what open puts on the shelf.
var arrived = map[string]string{quietSong: "0123456789", loudSong: "abcdefghij"}

// open starts a house; change may alter the options, for example to wrap the store.
func open(t *testing.T, change func(*Options)) *house {
	t.Helper()
	dir := t.TempDir()
	h := &house{t: t, copies: filepath.Join(dir, "copies"), log: &bytes.Buffer{}}
	ctx := t.Context()
	var err error
	if h.db, err = store.Open(ctx, store.Options{Path: filepath.Join(dir, "data", "evenshelf.db")}); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { h.db.Close() })
	add := func(name string) store.Shelf {
		root := filepath.Join(dir, name)
		if err := os.MkdirAll(root, 0o755); err != nil {
			t.Fatal(err)
		}
		shelf, err := h.db.AddShelf(ctx, store.Shelf{Name: name, Root: root, Copies: filepath.Join(h.copies, name)})
		if err != nil {
			t.Fatal(err)
		}
		return shelf
	}
	h.shelf, h.inbox = add("music"), add("uploads")
	for path, content := range arrived {
		h.write(h.shelf.Root, path, content)
	}
	workers := queue{h.db}
	if _, err := workers.Scan(ctx, h.shelf.ID, ""); err != nil {
		t.Fatal(err)
	}

	o := Options{Store: h.db, Queue: workers, Version: "test", CopiesDir: h.copies, UploadDir: h.inbox.Root, UploadLimit: 1000,
		Log: slog.New(slog.NewTextHandler(h.log, nil))}
	if change != nil {
		change(&o)
	}
	if h.api, err = New(o); err != nil {
		t.Fatal(err)
	}
	router := gin.New()
	h.api.Register(router)
	base, hangUp := context.WithCancel(context.Background())
	server := httptest.NewUnstartedServer(router)
	server.Config.BaseContext = func(net.Listener) context.Context { return base }
	server.Start()
	h.url, h.hangUp, h.closing = server.URL, hangUp, server.Close
	t.Cleanup(func() { hangUp(); server.Close() })
	return h
}

func (h *house) write(dir, name, content string) {
	h.t.Helper()
	file := filepath.Join(dir, filepath.FromSlash(name))
	if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
		h.t.Fatal(err)
	}
	if err := os.WriteFile(file, []byte(content), 0o644); err != nil {
		h.t.Fatal(err)
	}
}

// recording returns the recording of that path.
func (h *house) recording(path string) store.Recording {
	h.t.Helper()
	page, err := h.db.Recordings(h.t.Context(), store.RecordingQuery{})
	if err != nil {
		h.t.Fatal(err)
	}
	i := slices.IndexFunc(page.Recordings, func(r store.Recording) bool { return r.Path == path })
	if i < 0 {
		h.t.Fatalf("no recording %q", path)
	}
	return page.Recordings[i]
}

// start begins a run that makes copies of the music shelf and returns it with its jobs.
func (h *house) start() (store.Run, []store.Job) {
	h.t.Helper()
	return h.startRun(store.Copy)
}

func (h *house) startRun(d store.Delivery) (store.Run, []store.Job) {
	h.t.Helper()
	rotation, err := profile.Named("rotation")
	if err != nil {
		h.t.Fatal(err)
	}
	run, err := queue{h.db}.StartRun(h.t.Context(), store.NewRun{ShelfID: h.shelf.ID, Profile: rotation, Delivery: d})
	if err != nil {
		h.t.Fatal(err)
	}
	jobs, err := h.db.Jobs(h.t.Context(), store.JobQuery{RunID: run.ID})
	if err != nil {
		h.t.Fatal(err)
	}
	return run, jobs
}

// finish plays the worker for one job: a file under the job's own path, and readings before and after. What
// replaces an original is put in its place, and the original into the attic, where its hash names it.
func (h *house) finish(job store.Job, state level.State) {
	h.t.Helper()
	work, err := h.db.StartJob(h.t.Context(), job.ID)
	if err != nil {
		h.t.Fatal(err)
	}
	levelled := "levelled " + job.Path
	if work.Delivery == store.Replace && state == level.Done {
		original, err := os.ReadFile(filepath.Join(h.shelf.Root, job.Path))
		if err != nil {
			h.t.Fatal(err)
		}
		o := store.Original{RecordingID: job.RecordingID, JobID: job.ID, SHA256: hash(string(original)), Levelled: hash(levelled), Size: int64(len(levelled))}
		o.Stored = o.SHA256 + filepath.Ext(job.Path)
		h.write(h.shelf.Attic(), o.Stored, string(original))
		if err := h.db.KeepOriginal(h.t.Context(), o); err != nil {
			h.t.Fatal(err)
		}
		h.write(h.shelf.Root, job.Path, levelled)
		at := work.Recording.ModifiedAt // kept, so that a scan sees no change
		if err := os.Chtimes(filepath.Join(h.shelf.Root, job.Path), at, at); err != nil {
			h.t.Fatal(err)
		}
	} else {
		h.write(h.shelf.Copies, job.Path, levelled)
	}
	outcome := level.Outcome{
		Before:   analysis(-31.26, -12.5),
		Foreseen: &analysis(-18.01, -3.1).Reading,
		After:    analysis(-18.04, -3),
		Plan: &level.Plan{Anchor: profile.Speech, Anchored: -30.9, Aim: -18, Gain: 13.2, Ceiling: -1, Reason: "13.2 dB more",
			Ride:       &level.Ride{Speed: profile.Medium, Kept: 0.25, Range: 6, Least: -3.1, Most: 4, Gain: ride.Curve{-3.1, 0.04, 4, 4}},
			Compressor: &dynamics.Compression{Threshold: -15, Ratio: 3, Knee: 6, Release: 0.08},
			Limiter:    work.Profile.Limiter, Delivered: work.Profile.Delivered},
		Treatment: &level.Treatment{Limited1: 0.031, Limited3: 0.004, Compressed: 2.3, Deepest: 5.2, DeepestAt: 0.2, Order: audio.Ratio(audio.Undefined)},
		Verdict:   level.Verdict{State: state, Reason: "as heard"},
		Renders:   1,
	}
	if state == level.Held {
		outcome.Verdict.Doubts = []level.Doubt{{Code: "limiting", Words: "as heard", At: new(audio.Seconds(0.2))}, {Code: "noise", Words: "all of it"}}
	}
	if err := h.db.FinishJob(h.t.Context(), job.ID, outcome, job.Path, nil); err != nil {
		h.t.Fatal(err)
	}
}

func hash(content string) string { return fmt.Sprintf("%x", sha256.Sum256([]byte(content))) }

func analysis(loudness audio.LUFS, peak audio.DBTP) *level.Analysis {
	silence := float32(math.Inf(-1))
	return &level.Analysis{
		FormatName: "wav",
		Reading: meter.Reading{SampleRate: 48000, Channels: 2, Frames: 14400, Duration: 0.3, Integrated: loudness,
			Range: audio.LU(audio.Undefined), MaxMomentary: loudness, MaxShortTerm: loudness,
			ShortTerm10: loudness - 2, ShortTerm50: loudness, ShortTerm95: loudness + 2,
			TruePeak: peak, SamplePeak: audio.DBFS(peak), PLR: audio.LU(float64(peak) - float64(loudness)),
			MinPSR: 8, RMS: audio.DBFS(loudness), CrestFactor: 12, NoiseFloor: loudness - 30, MonoRule: audio.OneChannel},
		Decoder: "test", Engine: level.Version, Stored: &level.Stored{Codec: "pcm_s16le", Bits: 16},
		Faults:    []faults.Fault{{Code: "clipped", Severity: faults.Note, At: 0.1, Length: 0.01, Words: "clipped once"}},
		Condition: faults.Condition{HeadSilence: 0.1, TailSilence: 0, Correlation: 0.93, Balance: -0.4, Offset: audio.Ratio(audio.Undefined)},
		Dialogue:  level.Dialogue{ActiveTime: 0.2, SpeechTime: 0.1, SpeechLoudness: loudness + 1},
		Timeline: level.Timeline{
			Timeline: meter.Timeline{Step: 0.1,
				Momentary: []float32{silence, -31.26, -0.04},
				ShortTerm: []float32{silence, -40, -31.25},
				Peak:      []float32{silence, -12.34, -12.36}},
			Course: speech.Course{Active: []bool{false, true, true}, Speech: []float32{0, 0.07, 0.93}},
		},
	}
}

// queue is the workers as far as the API sees them.
type queue struct{ db *store.Store }

func (q queue) StartRun(ctx context.Context, n store.NewRun) (store.Run, error) {
	return q.db.CreateRun(ctx, n, func(context.Context, *store.Tx, []int64) error { return nil })
}

func (q queue) CancelRun(ctx context.Context, id int64) (store.Run, error) {
	return q.db.CancelRun(ctx, id)
}

// Restore puts the original back, unless the file in its place is not the levelled one.
func (q queue) Restore(ctx context.Context, id int64) (store.Recording, error) {
	fail := func(err error) (store.Recording, error) {
		return store.Recording{}, fmt.Errorf("restore recording %d: %w", id, err)
	}
	o, err := q.db.Original(ctx, id)
	if err != nil {
		return fail(err)
	}
	shelf, err := q.db.Shelf(ctx, o.ShelfID)
	if err != nil {
		return fail(err)
	}
	place := filepath.Join(shelf.Root, o.Path)
	if there, err := os.ReadFile(place); err != nil || hash(string(there)) != o.Levelled {
		return fail(fmt.Errorf("the file was changed since it was levelled: %w", store.ErrState))
	}
	if err := os.Rename(filepath.Join(shelf.Attic(), o.Stored), place); err != nil {
		return fail(err)
	}
	info, err := os.Stat(place)
	if err != nil {
		return fail(err)
	}
	if err := q.db.Restored(ctx, o, info.Size(), info.ModTime()); err != nil {
		return fail(err)
	}
	return q.db.Recording(ctx, id)
}

// Scan takes every visible .wav, .flac and .mp3 for a recording.
func (q queue) Scan(ctx context.Context, shelfID int64, folder string) (store.ScanResult, error) {
	shelf, err := q.db.Shelf(ctx, shelfID)
	if err != nil {
		return store.ScanResult{}, err
	}
	var files []store.FoundFile
	err = filepath.WalkDir(filepath.Join(shelf.Root, folder), func(path string, d fs.DirEntry, err error) error {
		ext := filepath.Ext(path)
		if err != nil || d.IsDir() || strings.HasPrefix(d.Name(), ".") || (ext != ".wav" && ext != ".flac" && ext != ".mp3") {
			return err
		}
		info, err := d.Info()
		if err != nil {
			return err
		}
		rel, err := filepath.Rel(shelf.Root, path)
		files = append(files, store.FoundFile{Path: filepath.ToSlash(rel), Size: info.Size(), ModifiedAt: info.ModTime()})
		return err
	})
	if err != nil {
		return store.ScanResult{}, err
	}
	return q.db.Found(ctx, shelfID, folder, files)
}

// reply is a response that has been read.
type reply struct {
	status int
	header http.Header
	body   []byte
}

// ask sends a request; a body that is not "" goes as JSON, and headers come in pairs.
func (h *house) ask(method, path, body string, headers ...string) reply {
	h.t.Helper()
	req, err := http.NewRequestWithContext(h.t.Context(), method, h.url+path, strings.NewReader(body))
	if err != nil {
		h.t.Fatal(err)
	}
	if body != "" {
		req.Header.Set("Content-Type", "application/json")
	}
	for i := 0; i+1 < len(headers); i += 2 {
		if headers[i] == "Host" {
			req.Host = headers[i+1]
		}
		req.Header.Set(headers[i], headers[i+1])
	}
	resp, err := http.DefaultTransport.RoundTrip(req) // no redirects, no surprises
	if err != nil {
		h.t.Fatalf("%s %s: %v", method, path, err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil {
		h.t.Fatalf("%s %s: %v", method, path, err)
	}
	return reply{resp.StatusCode, resp.Header, b}
}

func (h *house) get(path string, headers ...string) reply {
	h.t.Helper()
	return h.ask(http.MethodGet, path, "", headers...)
}

// into decodes a reply that has to have the status.
func (r reply) into(t *testing.T, status int, v any) {
	t.Helper()
	if r.status != status {
		t.Fatalf("status %d, want %d: %s", r.status, status, r.body)
	}
	if err := json.Unmarshal(r.body, v); err != nil {
		t.Fatalf("%v in %s", err, r.body)
	}
}

// wantProblem checks that a reply is a problem document of that kind whose words hold part.
func (r reply) wantProblem(t *testing.T, k kind, part string) {
	t.Helper()
	var p problem
	r.into(t, k.status, &p)
	if got := r.header.Get("Content-Type"); got != "application/problem+json" {
		t.Errorf("content type %q", got)
	}
	if p.Type != "/problems/"+k.name || p.Title != k.title || p.Status != k.status {
		t.Errorf("problem %+v, want kind %+v", p, k)
	}
	if !strings.Contains(p.Detail, part) {
		t.Errorf("detail %q does not say %q", p.Detail, part)
	}
}

func at(format string, args ...any) string { return "/api/v1" + fmt.Sprintf(format, args...) }
