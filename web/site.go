package web

import (
	"context"
	"errors"
	"net/http"
	"strconv"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/level"
	"evenshelf/store"
)

// Store is what the pages read. *store.Store is one.
type Store interface {
	Shelves(ctx context.Context) ([]store.ShelfSummary, error)
	Shelf(ctx context.Context, id int64) (store.ShelfSummary, error)
	Recording(ctx context.Context, id int64) (store.Recording, error)
	Recordings(ctx context.Context, q store.RecordingQuery) (store.RecordingPage, error)
	Readings(ctx context.Context, recordingID int64) (before, after *store.Reading, err error)
	RecordingHistory(ctx context.Context, recordingID int64) ([]store.Event, error)
	RecordingJobs(ctx context.Context, recordingID int64) ([]store.Job, error)
	Runs(ctx context.Context, limit int, before int64) ([]store.Run, error)
	Run(ctx context.Context, id int64) (store.Run, error)
	Jobs(ctx context.Context, q store.JobQuery) ([]store.Job, error)
	HeldFor(ctx context.Context, recordingIDs []int64) (map[int64][]level.Doubt, error)
	Original(ctx context.Context, recordingID int64) (store.Original, error)
	Originals(ctx context.Context, q store.OriginalQuery) ([]store.Original, error)
	Versions(ctx context.Context, q store.OriginalQuery) ([]store.Version, error)
	AtticOf(ctx context.Context, shelfID int64) (store.AtticCount, error)
	KeptByOthers(ctx context.Context, runID int64) ([]store.KeptBy, error)
}

// Site serves the dashboard's pages and static files.
type Site struct {
	store  Store
	assets *assets
	pages  pages
	now    func() time.Time // replaced in tests
}

// New reads the embedded files and parses every template; a template that does not parse is an error here,
// not on the day somebody opens the page.
func New(s Store) (*Site, error) {
	a, err := loadAssets()
	if err != nil {
		return nil, err
	}
	site := &Site{store: s, assets: a, now: time.Now}
	site.pages, err = parsePages(a, func() time.Time { return site.now() })
	if err != nil {
		return nil, err
	}
	return site, nil
}

// Register mounts the pages and the static files on r, all behind Headers.
func (s *Site) Register(r gin.IRouter) {
	g := r.Group("", Headers)
	g.GET("/", s.shelves)
	g.GET("/shelves/:id", s.shelf)
	g.GET("/recordings", s.recordings)
	g.GET("/recordings/:id", s.recording)
	g.GET("/runs", s.runs)
	g.GET("/runs/:id", s.run)
	g.GET("/static/:hash/*path", s.assets.serve)
	g.HEAD("/static/:hash/*path", s.assets.serve)
}

// policy lets a page load what this package serves and nothing else.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; font-src 'self'; " +
	"connect-src 'self'; media-src 'self'; base-uri 'none'; form-action 'self'; frame-ancestors 'none'"

// Headers sets the security headers every page is served with.
func Headers(c *gin.Context) {
	h := c.Writer.Header()
	h.Set("Content-Security-Policy", policy)
	h.Set("X-Content-Type-Options", "nosniff")
	h.Set("Referrer-Policy", "same-origin")
	h.Set("Cross-Origin-Opener-Policy", "same-origin")
	h.Set("Permissions-Policy", "camera=(), microphone=(), geolocation=()")
	c.Next()
}

// NotFound answers an address that no page has; the router's owner mounts it.
func (s *Site) NotFound(c *gin.Context) {
	Headers(c)
	s.render(c, http.StatusNotFound, "error", errorPage{
		Title: "Nothing here",
		Words: "There is no page at this address. It may have been mistyped, or what it showed is gone.",
	})
}

type errorPage struct{ Title, Words string }

// fail turns an error into a page: what was not found says so, anything else is ours and goes to the log.
func (s *Site) fail(c *gin.Context, err error) {
	_ = c.Error(err)
	if errors.Is(err, store.ErrNotFound) {
		s.NotFound(c)
		return
	}
	s.render(c, http.StatusInternalServerError, "error", errorPage{
		Title: "This page could not be made",
		Words: "Something went wrong on the server, not in what you did. The log says what. Nothing was changed.",
	})
}

// id reads the :id of the address. What is not a positive number cannot name anything.
func id(c *gin.Context) (int64, error) {
	n, err := strconv.ParseInt(c.Param("id"), 10, 64)
	if err != nil || n < 1 {
		return 0, store.ErrNotFound
	}
	return n, nil
}
