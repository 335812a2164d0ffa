package api

import (
	"bytes"
	"encoding/json"
	"fmt"
	"maps"
	"net/url"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/gin-gonic/gin"
	"github.com/goccy/go-yaml"

	"evenshelf/engine/level"
	"evenshelf/store"
)

// operations returns the document's operations by "METHOD /path", gin's way of writing the path.
func operations(t *testing.T) (schemas, map[string]map[string]any) {
	t.Helper()
	doc, err := loadDocument()
	if err != nil {
		t.Fatal(err)
	}
	var s schemas
	if err := json.Unmarshal(doc.json, &s.document); err != nil {
		t.Fatal(err)
	}
	ops := map[string]map[string]any{}
	braces := regexp.MustCompile(`\{(\w+)\}`)
	for path, item := range s.document["paths"].(map[string]any) {
		shared, _ := item.(map[string]any)["parameters"].([]any)
		for method, op := range item.(map[string]any) {
			if method == "parameters" {
				continue
			}
			op := maps.Clone(op.(map[string]any))
			own, _ := op["parameters"].([]any)
			op["parameters"] = slices.Concat(shared, own)
			ops[strings.ToUpper(method)+" "+braces.ReplaceAllString(path, ":$1")] = op
		}
	}
	return s, ops
}

func TestDocumentAndRoutesAgree(t *testing.T) {
	_, ops := operations(t)
	h := open(t, nil)
	router := gin.New()
	h.api.Register(router)
	routes := map[string]bool{}
	for _, r := range router.Routes() {
		routes[r.Method+" "+r.Path] = true
		if ops[r.Method+" "+r.Path] == nil {
			t.Errorf("the document lacks %s %s", r.Method, r.Path)
		}
	}
	for op := range ops {
		if !routes[op] {
			t.Errorf("the document promises %s, but there is no such route", op)
		}
	}
}

// What the OpenAPI 3.1 specification asks of a document beyond its schemas.
func TestDocumentIsSound(t *testing.T) {
	s, ops := operations(t)
	if s.document["openapi"] != "3.1.0" {
		t.Errorf("openapi: %v", s.document["openapi"])
	}
	ids := map[any]string{}
	for name, op := range ops {
		if op["operationId"] == nil || ids[op["operationId"]] != "" {
			t.Errorf("%s and %q share the operationId %v", name, ids[op["operationId"]], op["operationId"])
		}
		ids[op["operationId"]] = name
		if op["summary"] == nil || op["responses"] == nil || op["tags"] == nil {
			t.Errorf("%s lacks a summary, responses or tags", name)
		}
		declared := map[string]bool{}
		for _, p := range op["parameters"].([]any) {
			p, err := s.deref(p.(map[string]any))
			if err != nil {
				t.Errorf("%s: %v", name, err)
				continue
			}
			if p["in"] == "path" {
				declared[":"+p["name"].(string)] = p["required"] == true
			}
		}
		for _, step := range regexp.MustCompile(`:\w+`).FindAllString(name, -1) {
			if !declared[step] {
				t.Errorf("%s does not declare %s", name, step)
			}
		}
	}
	var refs func(v any)
	refs = func(v any) {
		switch v := v.(type) {
		case []any:
			for _, x := range v {
				refs(x)
			}
		case map[string]any:
			if pointer, ok := v["$ref"].(string); ok {
				if _, err := s.ref(pointer); err != nil {
					t.Error(err)
				}
			}
			for _, x := range v {
				refs(x)
			}
		}
	}
	refs(s.document)
}

// Every kind of problem is in the document's words, and the document names no other.
func TestDocumentNamesTheProblems(t *testing.T) {
	s, _ := operations(t)
	words := s.document["info"].(map[string]any)["description"].(string)
	named := regexp.MustCompile(`/problems/[a-z-]+`).FindAllString(words, -1)
	var kinds []string
	for _, k := range []kind{kindBadRequest, kindCrossOrigin, kindReadOnly, kindNotFound, kindMethod, kindExists, kindState,
		kindTooLarge, kindMediaType, kindHost, kindInvalid, kindInternal, kindUnavailable} {
		kinds = append(kinds, k.with("").Type)
	}
	slices.Sort(named)
	slices.Sort(kinds)
	if !slices.Equal(named, kinds) {
		t.Errorf("document: %v\ncode:     %v", named, kinds)
	}
}

// TestRepliesMatchDocument exercises every operation and checks status, content type and body of the reply,
// and the body of the request, against the document.
func TestRepliesMatchDocument(t *testing.T) {
	s, ops := operations(t)
	h := open(t, nil)
	run, jobs := h.start()
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Held)
	replacing, jobs := h.startRun(store.Replace)
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Held)
	waiting, _ := h.start()
	newRoot := t.TempDir()
	done := jobs[0].RecordingID
	form, formType := multipartForm(t, "files", "a.wav", "sound", "files", "notes.txt", "words")

	tried := map[string]bool{}
	for _, e := range []struct {
		op, url, body, contentType string
		status                     int
	}{
		{"GET /healthz", "/healthz", "", "", 200},
		{"GET /api/v1/openapi.json", "/api/v1/openapi.json", "", "", 200},
		{"GET /api/v1/openapi.yaml", "/api/v1/openapi.yaml", "", "", 200},
		{"GET /api/v1/shelves", at("/shelves"), "", "", 200},
		{"POST /api/v1/shelves", at("/shelves"), fmt.Sprintf(`{"name":"new","root":%q}`, newRoot), "", 201},
		{"POST /api/v1/shelves", at("/shelves"), fmt.Sprintf(`{"name":"new","root":%q}`, newRoot), "", 409},
		{"POST /api/v1/shelves", at("/shelves"), `{"name":"other","root":"relative"}`, "", 422},
		{"GET /api/v1/shelves/:id", at("/shelves/%d", h.shelf.ID), "", "", 200},
		{"GET /api/v1/shelves/:id", at("/shelves/99"), "", "", 404},
		{"POST /api/v1/shelves/:id/scan", at("/shelves/%d/scan", h.shelf.ID), "", "", 200},
		{"POST /api/v1/shelves/:id/scan", at("/shelves/%d/scan", h.shelf.ID), `{"folder":"evening"}`, "", 200},
		{"GET /api/v1/shelves/:id/spines", at("/shelves/%d/spines", h.shelf.ID), "", "", 200},
		{"POST /api/v1/shelves/:id/uploads", at("/shelves/%d/uploads", h.inbox.ID), form, formType, 201},
		{"POST /api/v1/shelves/:id/uploads", at("/shelves/%d/uploads", h.shelf.ID), form, formType, 403},
		{"GET /api/v1/recordings", at("/recordings?limit=1"), "", "", 200},
		{"GET /api/v1/recordings", at("/recordings?limit=x"), "", "", 400},
		{"GET /api/v1/recordings/:id", at("/recordings/%d", done), "", "", 200},
		{"GET /api/v1/recordings/:id/timeline", at("/recordings/%d/timeline", done), "", "", 200},
		{"GET /api/v1/recordings/:id/sound", at("/recordings/%d/sound", done), "", "", 200},
		{"GET /api/v1/recordings/:id/sound", at("/recordings/%d/sound?version=after", done), "", "", 200},
		{"HEAD /api/v1/recordings/:id/sound", at("/recordings/%d/sound", done), "", "", 200},
		{"GET /api/v1/recordings/:id/result", at("/recordings/%d/result", done), "", "", 200},
		{"HEAD /api/v1/recordings/:id/result", at("/recordings/%d/result", done), "", "", 200},
		{"GET /api/v1/attic", at("/attic?run=%d", replacing.ID), "", "", 200},
		{"GET /api/v1/attic", at("/attic?shelf=x"), "", "", 400},
		{"GET /api/v1/attic", at("/attic?run=99"), "", "", 404},
		{"GET /api/v1/attic/versions", at("/attic/versions?run=%d", replacing.ID), "", "", 200},
		{"GET /api/v1/attic/versions", at("/attic/versions?limit=x"), "", "", 400},
		{"POST /api/v1/recordings/:id/restore", at("/recordings/%d/restore", done), "", "", 200},
		{"POST /api/v1/recordings/:id/restore", at("/recordings/%d/restore", done), "", "", 404},
		{"GET /api/v1/recordings/:id", at("/recordings/%d", done), "", "", 200},
		{"GET /api/v1/runs", at("/runs"), "", "", 200},
		{"POST /api/v1/runs", at("/runs"), fmt.Sprintf(`{"shelf_id":%d,"folder":"evening","profile":"rotation","delivery":"measure"}`, h.shelf.ID), "", 201},
		{"POST /api/v1/runs", at("/runs"), fmt.Sprintf(`{"shelf_id":%d,"recordings":[%d],"profile":"untouched","delivery":"copy"}`, h.shelf.ID, done), "", 201},
		{"POST /api/v1/runs", at("/runs"), fmt.Sprintf(`{"shelf_id":%d,"profile":"rotation","delivery":"replace"}`, h.shelf.ID), "", 201},
		{"GET /api/v1/runs/:id", at("/runs/%d", run.ID), "", "", 200},
		{"POST /api/v1/runs/:id/cancel", at("/runs/%d/cancel", waiting.ID), "", "", 200},
		{"POST /api/v1/runs/:id/cancel", at("/runs/%d/cancel", waiting.ID), "", "", 409},
		{"GET /api/v1/runs/:id/jobs", at("/runs/%d/jobs", run.ID), "", "", 200},
		{"GET /api/v1/runs/:id/events", at("/runs/%d/events", run.ID), "", "", 200},
		{"GET /api/v1/profiles", at("/profiles"), "", "", 200},
		{"GET /api/v1/profiles/:name", at("/profiles/rotation"), "", "", 200},
		{"GET /api/v1/profiles/:name", at("/profiles/none"), "", "", 404},
		{"POST /api/v1/profiles/check", at("/profiles/check"), "based_on = 'talk'", "text/plain", 200},
		{"POST /api/v1/profiles/check", at("/profiles/check"), "based_on = 'talk'\nride.lift_db = 99\nbits", "application/toml", 200},
		{"POST /api/v1/profiles/check", at("/profiles/check"), "ride.lift_db = 99", "application/toml; charset=utf-8", 200},
	} {
		op := ops[e.op]
		if op == nil {
			t.Fatalf("the document lacks %s", e.op)
		}
		tried[e.op] = true
		if e.body != "" && e.contentType == "" && e.status < 300 {
			content := op["requestBody"].(map[string]any)["content"].(map[string]any)["application/json"].(map[string]any)
			checkJSON(t, s, content["schema"], []byte(e.body), "request "+e.op)
		}
		var headers []string
		if e.contentType != "" {
			headers = []string{"Content-Type", e.contentType}
		}
		method, _, _ := strings.Cut(e.op, " ")
		r := h.ask(method, e.url, e.body, headers...)
		if r.status != e.status {
			t.Errorf("%s %s: status %d, want %d: %s", method, e.url, r.status, e.status, r.body)
			continue
		}
		responses := op["responses"].(map[string]any)
		response, ok := responses[fmt.Sprint(r.status)].(map[string]any)
		if !ok {
			if response, ok = responses["default"].(map[string]any); !ok || r.status < 400 {
				t.Errorf("%s: status %d is not in the document", e.op, r.status)
				continue
			}
		}
		response, err := s.deref(response)
		if err != nil {
			t.Fatal(err)
		}
		for name := range mapOf(response["headers"]) {
			if r.header.Get(name) == "" {
				t.Errorf("%s: header %s is missing", e.op, name)
			}
		}
		contents := mapOf(response["content"])
		content, ok := contents[r.header.Get("Content-Type")].(map[string]any)
		if _, any := contents["*/*"]; !ok && !any {
			t.Errorf("%s: content type %q is not in the document", e.op, r.header.Get("Content-Type"))
		}
		if strings.HasSuffix(r.header.Get("Content-Type"), "json") {
			checkJSON(t, s, content["schema"], r.body, e.op)
		}
	}
	for op := range ops {
		if !tried[op] {
			t.Errorf("%s is never tried", op)
		}
	}

	// The stream's events carry documented values too.
	for _, e := range readEvents(bytes.NewReader(h.get(at("/runs/%d/events", run.ID)).body)) {
		schema := map[string]string{"job": "Event", "run": "Run", "end": "Run"}[e.name]
		if schema == "" {
			t.Errorf("event %q is not in the document", e.name)
			continue
		}
		checkJSON(t, s, map[string]any{"$ref": "#/components/schemas/" + schema}, []byte(e.data), "event "+e.name)
	}
	var fromYAML any
	if err := yaml.Unmarshal(h.get("/api/v1/openapi.yaml").body, &fromYAML); err != nil {
		t.Error(err)
	}
}

func mapOf(v any) map[string]any { m, _ := v.(map[string]any); return m }

func checkJSON(t *testing.T, s schemas, schema any, body []byte, place string) {
	t.Helper()
	var v any
	if err := json.Unmarshal(body, &v); err != nil {
		t.Errorf("%s: %v in %s", place, err, body)
		return
	}
	for _, e := range s.check(schema.(map[string]any), v, place) {
		t.Error(e)
	}
}

// Each documented query parameter, with each word of its enumeration, is understood; no other is.
func TestQueryParametersMatchDocument(t *testing.T) {
	s, ops := operations(t)
	h := open(t, nil)
	run, jobs := h.start()
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Done)
	for name, op := range ops {
		path, isGet := strings.CutPrefix(name, "GET ")
		if !isGet || strings.HasSuffix(path, "/sound") {
			continue
		}
		path = strings.Replace(path, "runs/:id", fmt.Sprintf("runs/%d", run.ID), 1)
		strict := false
		for _, p := range op["parameters"].([]any) {
			p, err := s.deref(p.(map[string]any))
			if err != nil {
				t.Fatal(err)
			}
			if p["in"] != "query" || p["name"] == "cursor" { // a cursor cannot be made up
				continue
			}
			strict = true
			values := []any{"1"}
			schema, err := s.deref(p["schema"].(map[string]any))
			if err != nil {
				t.Fatal(err)
			}
			if words, ok := schema["enum"].([]any); ok {
				values = words
			}
			for _, v := range values {
				address := path + "?" + url.Values{p["name"].(string): {v.(string)}}.Encode()
				if r := h.get(address); r.status != 200 {
					t.Errorf("%s: %d %s", address, r.status, r.body)
				}
			}
			if r := h.get(path + "?" + p["name"].(string) + "=%00"); r.status != 400 {
				t.Errorf("%s accepts %s=NUL", path, p["name"])
			}
		}
		if strict {
			h.get(path+"?colour=blue").wantProblem(t, kindBadRequest, "colour")
		}
	}
}
