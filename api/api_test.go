package api

import (
	"context"
	"errors"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

// broken is a store whose database has failed.
type broken struct{ Store }

var errDisk = errors.New("disk I/O error at sector 7")

func (broken) Shelves(context.Context) ([]store.ShelfSummary, error) { return nil, errDisk }
func (broken) Originals(context.Context, store.OriginalQuery) ([]store.Original, error) {
	return nil, errDisk
}
func (broken) Original(context.Context, int64) (store.Original, error) {
	return store.Original{}, errDisk
}
func (broken) HeldCount(context.Context) (int, error)                { return 0, errDisk }
func (broken) Runs(context.Context, int, int64) ([]store.Run, error) { panic("a bug") }

func breakStore(o *Options) { o.Store = broken{o.Store} }

func TestUnexpectedErrorsSayNothing(t *testing.T) {
	h := open(t, breakStore)
	for path, cause := range map[string]string{"/shelves": "sector 7", "/runs": "a bug"} {
		r := h.get(at("%s", path))
		r.wantProblem(t, kindInternal, "")
		if strings.Contains(string(r.body), "detail") || strings.Contains(string(r.body), cause) {
			t.Errorf("%s tells the cause: %s", path, r.body)
		}
		if !strings.Contains(h.log.String(), cause) {
			t.Errorf("%s: the log does not tell %q: %s", path, cause, h.log)
		}
	}
	h.get("/healthz").wantProblem(t, kindUnavailable, "database")
}

func TestHealthTellsTheVersion(t *testing.T) {
	var got struct{ Status, Version string }
	open(t, nil).get("/healthz").into(t, 200, &got)
	if got.Status != "ok" || got.Version != "test" {
		t.Errorf("%+v", got)
	}
}

func TestAddressesThatAreNotThere(t *testing.T) {
	h := open(t, nil)
	for _, path := range []string{"/api", "/api/v1/nothing", "/api/v2/shelves", "/api/v1/shelves/1/nothing"} {
		h.get(path).wantProblem(t, kindNotFound, "nothing at this address")
	}
	if r := h.get("/elsewhere"); r.header.Get("Content-Type") == "application/problem+json" {
		t.Error("pages outside /api belong to the dashboard")
	}
	r := h.ask(http.MethodDelete, "/api/v1/shelves", "")
	r.wantProblem(t, kindMethod, "DELETE")
	if allow := r.header.Get("Allow"); !strings.Contains(allow, "GET") || !strings.Contains(allow, "POST") {
		t.Errorf("Allow: %q", allow)
	}
	for _, path := range []string{"/shelves/9", "/shelves/9/spines", "/recordings/99", "/recordings/99/timeline", "/recordings/99/sound",
		"/recordings/99/result", "/runs/9", "/runs/9/jobs", "/runs/9/events", "/profiles/none"} {
		h.get(at("%s", path)).wantProblem(t, kindNotFound, "")
	}
	h.ask(http.MethodPost, at("/runs/9/cancel"), "").wantProblem(t, kindNotFound, "")
	h.ask(http.MethodPost, at("/shelves/9/scan"), "").wantProblem(t, kindNotFound, "")
	for _, id := range []string{"0", "-1", "x", "1.0", "99999999999999999999", "%00", "1e3"} {
		for _, path := range []string{"/shelves/" + id, "/recordings/" + id, "/runs/" + id, "/runs/" + id + "/events", "/recordings/" + id + "/sound"} {
			h.get(at("%s", path)).wantProblem(t, kindBadRequest, "id")
		}
	}
}

func TestBodiesThatCannotBeRead(t *testing.T) {
	h := open(t, nil)
	for _, c := range []struct {
		body string
		kind kind
		says string
	}{
		{`{"shelf_id":1,"profil":"rotation"}`, kindBadRequest, "profil: is not a field"},
		{`{"shelf_id":"1"}`, kindBadRequest, "shelf_id: is a string; it has to be a whole number"},
		{`{"recordings":7}`, kindBadRequest, "recordings: is a number; it has to be a list"},
		{`{"shelf_id":1.5}`, kindBadRequest, "shelf_id"},
		{`[]`, kindBadRequest, "has to be an object"},
		{`{"shelf_id":`, kindBadRequest, "ends in the middle"},
		{`{"shelf_id" 1}`, kindBadRequest, "at byte"},
		{`{} {}`, kindBadRequest, "goes on after"},
		{`{} x`, kindBadRequest, ""},
		{`{}`, kindInvalid, `shelf_id: has to be given; profile: no profile is called ""; delivery: "" is not one of`},
		{`{"shelf_id":9,"profile":"rotation","delivery":"copy"}`, kindInvalid, "there is no shelf 9"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"post"}`, kindInvalid, `"post" is not one of`},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","recordings":[]}`, kindInvalid, "empty list"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","recordings":[0]}`, kindInvalid, "0 is not the id"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","recordings":[99]}`, kindInvalid, "recording 99"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","recordings":[1],"folder":"evening"}`, kindInvalid, "cannot go together"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","folder":"../up"}`, kindInvalid, "folder"},
		{`{"shelf_id":1,"profile":"rotation","delivery":"copy","folder":"nothing-here"}`, kindInvalid, "no recordings"},
		{`{"folder":"` + strings.Repeat("x", bodyLimit) + `"}`, kindTooLarge, "4.0 MiB"},
	} {
		r := h.ask(http.MethodPost, at("/runs"), c.body)
		r.wantProblem(t, c.kind, c.says)
	}
	h.ask(http.MethodPost, at("/runs"), "").wantProblem(t, kindMediaType, "application/json")
	h.ask(http.MethodPost, at("/runs"), "a=b", "Content-Type", "application/x-www-form-urlencoded").wantProblem(t, kindMediaType, "")
	h.ask(http.MethodPost, at("/runs"), "", "Content-Type", "application/json; charset=utf-8").wantProblem(t, kindBadRequest, "empty")
	h.ask(http.MethodPost, at("/shelves/1/scan"), `{"folder":"morning"}`).wantProblem(t, kindInvalid, "not a folder")
	h.ask(http.MethodPost, at("/shelves/1/scan"), `{"folder":"/etc"}`).wantProblem(t, kindInvalid, "relative")
	h.get(at("/recordings?cursor=made-up")).wantProblem(t, kindInvalid, "cursor")
	h.get(at("/recordings?q=%%zz")).wantProblem(t, kindBadRequest, "query string")
	h.get(at("/recordings?limit=1001&state=lost")).wantProblem(t, kindBadRequest, `state: "lost" is not one of waiting, working, done, held, failed, cancelled, never`)
}

// A page of another site cannot make changes through a visitor's browser, nor read by DNS rebinding.
func TestOtherSitesAreKeptOut(t *testing.T) {
	h := open(t, func(o *Options) { o.Hosts = []string{"Localhost", "::1", "127.0.0.1"} })
	h.ask(http.MethodPost, at("/shelves/1/scan"), "", "Sec-Fetch-Site", "cross-site").wantProblem(t, kindCrossOrigin, "")
	h.ask(http.MethodPost, at("/shelves/1/scan"), "", "Origin", "http://elsewhere.example").wantProblem(t, kindCrossOrigin, "")
	if r := h.ask(http.MethodPost, at("/shelves/1/scan"), "", "Origin", h.url, "Sec-Fetch-Site", "same-origin"); r.status != 200 {
		t.Errorf("our own page is refused: %s", r.body)
	}
	for host, fine := range map[string]bool{"localhost": true, "LOCALHOST:99": true, "localhost.": true, "[::1]:80": true, "[::1]": true,
		"127.0.0.1:1": true, "elsewhere.example": false, "localhost.elsewhere.example": false, "127.0.0.1.elsewhere.example": false} {
		r := h.get("/healthz", "Host", host)
		if fine && r.status != 200 {
			t.Errorf("host %s: %s", host, r.body)
		}
		if !fine {
			r.wantProblem(t, kindHost, "host name")
		}
	}
	if r := h.get(at("/shelves")); r.header.Get("X-Content-Type-Options") != "nosniff" || r.header.Get("Access-Control-Allow-Origin") != "" {
		t.Errorf("headers %v", r.header)
	}
}

// The middleware guards the dashboard's routes too, and an aborted reply is not taken for a whole one.
func TestMiddlewareCoversOtherRoutes(t *testing.T) {
	h := open(t, nil)
	router := gin.New()
	h.api.Register(router)
	router.GET("/page", func(*gin.Context) { panic("page broke") })
	router.GET("/half", func(c *gin.Context) { c.String(200, "half of a"); c.Writer.Flush(); panic("half broke") })
	server := httptest.NewServer(router)
	defer server.Close()
	h.url = server.URL
	h.get("/page").wantProblem(t, kindInternal, "")
	resp, err := http.Get(server.URL + "/half")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	if _, err := resp.Body.Read(make([]byte, 100)); err == nil {
		_, err = resp.Body.Read(make([]byte, 100))
		if err == nil || err.Error() == "EOF" {
			t.Errorf("half a reply ended with %v", err)
		}
	}
}

func TestShelvesOnlyWhereTheOperatorAllows(t *testing.T) {
	allowed, outside := t.TempDir(), t.TempDir()
	for _, dir := range []string{"a", "b"} {
		if err := os.Mkdir(filepath.Join(allowed, dir), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Symlink(outside, filepath.Join(allowed, "way-out")); err != nil {
		t.Fatal(err)
	}
	h := open(t, func(o *Options) { o.ShelfRoots = []string{allowed} })
	post := func(body string) reply { return h.ask(http.MethodPost, at("/shelves"), body) }
	quote := func(elem ...string) string { return `"` + filepath.Join(elem...) + `"` }
	const refused = "not in a folder that is open to shelves"
	for _, root := range []string{quote(outside), quote(allowed, "way-out"), quote(allowed, "way-out/deeper"), `"` + allowed + `/../x"`, quote("/no/such"),
		`"a"`, `""`, `"` + allowed + `\u0000"`} {
		post(`{"name":"x","root":`+root+`}`).wantProblem(t, kindInvalid, refused)
	}
	post(`{"name":"x","root":`+quote(allowed, "a")+`,"copies":`+quote(outside, "c")+`}`).wantProblem(t, kindInvalid, "copies: ")
	post(`{"name":"x","root":`+quote(allowed, "a")+`,"copies":`+quote(allowed, "way-out/c")+`}`).wantProblem(t, kindInvalid, "copies: ")
	post(`{"name":"../x","root":`+quote(allowed, "a")+`}`).wantProblem(t, kindInvalid, "name")
	post(`{"name":"x","root":`+quote(allowed, "a")+`,"copies":`+quote(allowed, "a/copies")+`}`).wantProblem(t, kindInvalid, "apart")
	post(`{"name":"x","root":`+quote(allowed, "missing")+`}`).wantProblem(t, kindInvalid, "")

	var made store.ShelfSummary
	r := post(`{"name":"x","root":` + quote(allowed, "a") + `}`)
	r.into(t, 201, &made)
	if r.header.Get("Location") != at("/shelves/%d", made.ID) || made.Copies != filepath.Join(h.copies, "x") {
		t.Errorf("%s at %s", r.body, r.header.Get("Location"))
	}
	post(`{"name":"x","root":`+quote(allowed, "b")+`}`).wantProblem(t, kindExists, "taken")
	post(`{"name":"y","root":`+quote(allowed, "b")+`,"copies":`+quote(allowed, "c")+`}`).into(t, 201, &made)

	bare := open(t, func(o *Options) { o.CopiesDir = "" })
	bare.ask(http.MethodPost, at("/shelves"), `{"name":"x","root":`+quote(outside)+`}`).wantProblem(t, kindInvalid, "copies: has to be given")
}

// A shelf whose disk is not mounted is a state, not an internal error.
func TestScanOfAShelfThatIsGone(t *testing.T) {
	h := open(t, nil)
	if err := os.RemoveAll(h.shelf.Root); err != nil {
		t.Fatal(err)
	}
	h.ask(http.MethodPost, at("/shelves/%d/scan", h.shelf.ID), "").wantProblem(t, kindState, "cannot be opened")
}

func TestNewWantsItsParts(t *testing.T) {
	h := open(t, nil)
	for name, o := range map[string]Options{"no store": {Queue: queue{h.db}}, "no queue": {Store: h.db}, "limit": {Store: h.db, Queue: queue{h.db}, UploadLimit: -1}} {
		if _, err := New(o); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}
