// Package api is Evenshelf's JSON API: what the dashboard, scripts and other programs talk to.
//
// A request passes recovery, the request log, the host and origin checks and a body limit (middleware.go)
// and reaches a handler. A handler never writes: it returns a status, a value and an error, and one
// adapter (reply.go) turns these into JSON, into a stream for values that send themselves (sounds, spines,
// events), or into a problem document (problem.go, RFC 9457). An error nobody planned for becomes a bare
// 500; its cause goes to the log only.
//
// The API reads and writes files in four places and no others: it serves sounds from inside a shelf's root,
// its copies folder or its attic, and it takes uploads into the one shelf that lives in the upload folder.
// Every such path goes through an os.Root, so that neither ".." nor a symbolic link leads out.
//
// openapi.yaml describes every route; a test holds the document, the routes and real replies against each
// other, so that none of the three can drift.
package api

import (
	"context"
	"fmt"
	"log/slog"
	"net/http"
	"path/filepath"
	"runtime/debug"
	"slices"
	"sync/atomic"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// Store is what the API reads, and the one thing it adds: a shelf. *store.Store is one.
type Store interface {
	AddShelf(ctx context.Context, sh store.Shelf) (store.Shelf, error)
	Shelves(ctx context.Context) ([]store.ShelfSummary, error)
	Shelf(ctx context.Context, id int64) (store.ShelfSummary, error)
	ShelfNamed(ctx context.Context, name string) (store.Shelf, error)
	Spines(ctx context.Context, shelfID int64) ([]store.Spine, error)

	Recording(ctx context.Context, id int64) (store.Recording, error)
	Recordings(ctx context.Context, q store.RecordingQuery) (store.RecordingPage, error)
	Readings(ctx context.Context, recordingID int64) (before, after *store.Reading, err error)
	Timeline(ctx context.Context, readingID int64) (level.Timeline, error)
	RecordingHistory(ctx context.Context, recordingID int64) ([]store.Event, error)
	RecordingJobs(ctx context.Context, recordingID int64) ([]store.Job, error)

	Original(ctx context.Context, recordingID int64) (store.Original, error)
	Originals(ctx context.Context, q store.OriginalQuery) ([]store.Original, error)
	Versions(ctx context.Context, q store.OriginalQuery) ([]store.Version, error)
	KeptByOthers(ctx context.Context, runID int64) ([]store.KeptBy, error)

	Runs(ctx context.Context, limit int, before int64) ([]store.Run, error)
	Run(ctx context.Context, id int64) (store.Run, error)
	Job(ctx context.Context, id int64) (store.Job, error)
	Plan(ctx context.Context, jobID int64) (*level.Plan, error)
	Jobs(ctx context.Context, q store.JobQuery) ([]store.Job, error)
	RunEvents(ctx context.Context, runID, after int64, limit int) ([]store.Event, error)
	Changed() <-chan struct{}
	HeldCount(ctx context.Context) (int, error)
}

// Queue is what the API asks of the workers.
type Queue interface {
	StartRun(ctx context.Context, n store.NewRun) (store.Run, error)
	CancelRun(ctx context.Context, id int64) (store.Run, error)
	Scan(ctx context.Context, shelfID int64, folder string) (store.ScanResult, error)
	Restore(ctx context.Context, recordingID int64) (store.Recording, error)
}

// Options are the parts the API is made of. Store and Queue are needed; the rest has a working zero value.
type Options struct {
	Store    Store
	Queue    Queue
	Profiles func() profile.Set // called for each request that needs them; nil = the built-in ones
	Media    *media.Toolbox     // plays single tracks of films; nil = films are sent as they are
	Log      *slog.Logger       // nil = silent
	Version  string             // shown by /healthz; "" = what the Go build recorded

	Hosts       []string // host names a request may be addressed to, without port; nil = any
	ShelfRoots  []string // folders below which shelves may be registered; nil = any
	CopiesDir   string   // a shelf's copies go to CopiesDir/<shelf name> unless it says otherwise
	UploadDir   string   // root of the one shelf that takes uploads; "" = none does
	UploadLimit int64    // largest uploaded file, bytes; 0 = 4 GiB
}

// API serves the routes. Make one with New.
type API struct {
	Options
	document document
	streams  atomic.Int64 // event streams that are open
	heard    atomic.Int64 // tracks of films that are being sent
	pace     pace
}

// New checks the options and sweeps uploads that a killed process left unfinished. It switches gin, whose
// mode is global, to release mode: gin would print to standard output otherwise.
func New(o Options) (*API, error) {
	if o.Store == nil || o.Queue == nil {
		return nil, fmt.Errorf("api: a store and a queue are needed")
	}
	if o.UploadLimit < 0 {
		return nil, fmt.Errorf("api: upload limit of %d bytes", o.UploadLimit)
	}
	if o.Profiles == nil {
		o.Profiles = func() profile.Set { return profile.Gather("") }
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	if o.UploadLimit == 0 {
		o.UploadLimit = 4 << 30
	}
	if o.Version == "" {
		o.Version = buildVersion()
	}
	// Paths are compared with those of shelves, which are absolute.
	o.ShelfRoots = slices.Clone(o.ShelfRoots)
	dirs := []*string{&o.CopiesDir, &o.UploadDir}
	for i := range o.ShelfRoots {
		dirs = append(dirs, &o.ShelfRoots[i])
	}
	for _, dir := range dirs {
		if err := makeAbsolute(dir); err != nil {
			return nil, fmt.Errorf("api: folder %q: %w", *dir, err)
		}
	}
	gin.SetMode(gin.ReleaseMode)
	doc, err := loadDocument()
	if err != nil {
		return nil, fmt.Errorf("api: openapi document: %w", err)
	}
	if err := sweepUploads(o.UploadDir); err != nil {
		return nil, fmt.Errorf("api: sweep unfinished uploads: %w", err)
	}
	return &API{Options: o, document: doc, pace: defaultPace}, nil
}

// Register installs the middleware on the engine, for every route it serves from then on, and adds the
// API's own routes. Call it before other rooms add theirs.
func (a *API) Register(r *gin.Engine) {
	r.HandleMethodNotAllowed = true
	r.Use(a.recoverPanics, a.logRequest, a.checkHost, a.checkOrigin, limitBody, a.unrouted)

	r.GET("/healthz", a.handle(a.health))
	v1 := r.Group("/api/v1", safeHeaders)
	v1.GET("/openapi.json", a.handle(a.documentJSON))
	v1.GET("/openapi.yaml", a.handle(a.documentYAML))

	v1.GET("/shelves", a.handle(a.listShelves))
	v1.POST("/shelves", a.handle(a.addShelf))
	v1.GET("/shelves/:id", a.handle(a.showShelf))
	v1.POST("/shelves/:id/scan", a.handle(a.scanShelf))
	v1.GET("/shelves/:id/spines", a.handle(a.showSpines))
	v1.POST("/shelves/:id/uploads", a.handle(a.upload))

	v1.GET("/recordings", a.handle(a.listRecordings))
	v1.GET("/recordings/:id", a.handle(a.showRecording))
	v1.GET("/recordings/:id/timeline", a.handle(a.showTimeline))
	v1.GET("/recordings/:id/sound", a.handle(a.playSound))
	v1.HEAD("/recordings/:id/sound", a.handle(a.playSound))
	v1.GET("/recordings/:id/result", a.handle(a.fetchResult))
	v1.HEAD("/recordings/:id/result", a.handle(a.fetchResult))
	v1.POST("/recordings/:id/restore", a.handle(a.restore))

	v1.GET("/attic", a.handle(a.listAttic))
	v1.GET("/attic/versions", a.handle(a.listVersions))

	v1.GET("/runs", a.handle(a.listRuns))
	v1.POST("/runs", a.handle(a.startRun))
	v1.GET("/runs/:id", a.handle(a.showRun))
	v1.POST("/runs/:id/cancel", a.handle(a.cancelRun))
	v1.GET("/runs/:id/jobs", a.handle(a.listJobs))
	v1.GET("/runs/:id/events", a.handle(a.followRun))

	v1.GET("/profiles", a.handle(a.listProfiles))
	v1.GET("/profiles/:name", a.handle(a.showProfile))
	v1.POST("/profiles/check", a.handle(a.checkProfile))
}

// health answers whether the service can do its work, which comes down to whether the database answers.
func (a *API) health(c *gin.Context) (int, any, error) {
	ctx, cancel := context.WithTimeout(c.Request.Context(), 2*time.Second)
	defer cancel()
	if _, err := a.Store.HeldCount(ctx); err != nil {
		a.Log.Error("health", "error", err)
		return 0, nil, unavailable("the database does not answer")
	}
	return http.StatusOK, struct {
		Status  string `json:"status"`
		Version string `json:"version"`
	}{"ok", a.Version}, nil
}

func makeAbsolute(dir *string) (err error) {
	if *dir != "" {
		*dir, err = filepath.Abs(*dir)
	}
	return err
}

func buildVersion() string {
	if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" {
		return info.Main.Version
	}
	return "unknown"
}
