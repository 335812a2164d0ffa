package api

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"mime"
	"net/url"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/gin-gonic/gin"
)

// pathID reads the :id of a route.
func pathID(c *gin.Context) (int64, error) {
	id, err := strconv.ParseInt(c.Param("id"), 10, 64)
	if err != nil || id < 1 {
		return 0, badRequest("", complaint{"id", fmt.Sprintf("%q is not a whole number from 1", c.Param("id"))})
	}
	return id, nil
}

// query reads a query string and collects what is wrong with it. Names it was not asked for are refused:
// a mistyped filter would otherwise silently show everything.
type query struct {
	values url.Values
	known  []string
	errs   []complaint
}

func queryOf(c *gin.Context) (*query, error) {
	values, err := url.ParseQuery(c.Request.URL.RawQuery)
	if err != nil {
		return nil, badRequest("the query string is not well formed")
	}
	return &query{values: values}, nil
}

func (q *query) complain(field, format string, args ...any) {
	q.errs = append(q.errs, complaint{field, fmt.Sprintf(format, args...)})
}

func (q *query) text(name string) string {
	q.known = append(q.known, name)
	v := q.values.Get(name)
	if !utf8.ValidString(v) || strings.ContainsRune(v, 0) {
		q.complain(name, "is not text")
	}
	return v
}

// number reads a whole number from low to high; absent gives 0.
func (q *query) number(name string, low, high int64) int64 {
	v := q.text(name)
	if v == "" {
		return 0
	}
	n, err := strconv.ParseInt(v, 10, 64)
	if err != nil || n < low || n > high {
		q.complain(name, "%q is not a whole number from %d to %d", v, low, high)
	}
	return n
}

// choice reads one of the listed words; absent gives "".
func (q *query) choice(name string, words ...string) string {
	v := q.text(name)
	if v != "" && !slices.Contains(words, v) {
		q.complain(name, "%q is not one of %s", v, strings.Join(words, ", "))
	}
	return v
}

// err is the problem with the query, or nil.
func (q *query) err() error {
	for name := range q.values {
		if !slices.Contains(q.known, name) {
			q.complain(name, "is not a parameter of this address")
		}
	}
	if len(q.errs) > 0 {
		return badRequest("", q.errs...)
	}
	return nil
}

// readJSON decodes the body into v. An absent body is fine if optional.
func readJSON(c *gin.Context, v any, optional bool) error {
	if optional && (c.Request.ContentLength == 0 || c.Request.Body == nil) {
		return nil
	}
	if t, _, err := mime.ParseMediaType(c.GetHeader("Content-Type")); err != nil || t != "application/json" {
		return kindMediaType.with("the body has to be application/json")
	}
	d := json.NewDecoder(c.Request.Body)
	d.DisallowUnknownFields()
	err := d.Decode(v)
	if optional && errors.Is(err, io.EOF) {
		return nil // a chunked body turned out to be empty
	}
	if err == nil {
		if _, err = d.Token(); err == io.EOF {
			return nil
		} else if err == nil {
			return badRequest("the body goes on after the JSON object")
		}
	}
	return jsonProblem(err)
}

// jsonProblem says in words what is wrong with a JSON body.
func jsonProblem(err error) error {
	var syntax *json.SyntaxError
	var kind *json.UnmarshalTypeError
	if name, ok := strings.CutPrefix(err.Error(), "json: unknown field "); ok { // encoding/json has no type for it
		return badRequest("", complaint{strings.Trim(name, `"`), "is not a field of this request"})
	}
	switch {
	case errors.As(err, &kind) && kind.Field == "":
		return badRequest(fmt.Sprintf("the body is a JSON %s; it has to be an object", kind.Value))
	case errors.As(err, &kind):
		return badRequest("", complaint{kind.Field, fmt.Sprintf("is a %s; it has to be %s", kind.Value, jsonType(kind.Type.Kind().String()))})
	case errors.As(err, &syntax):
		return badRequest(fmt.Sprintf("the body is not JSON: %s, at byte %d", syntax, syntax.Offset))
	case errors.Is(err, io.EOF):
		return badRequest("the body is empty; it has to be a JSON object")
	case errors.Is(err, io.ErrUnexpectedEOF):
		return badRequest("the body ends in the middle of the JSON object")
	}
	return err // too large, or the connection broke
}

func jsonType(goKind string) string {
	switch goKind {
	case "int64":
		return "a whole number"
	case "slice":
		return "a list"
	}
	return "a " + goKind
}

// folderOf checks a folder on a shelf as a client names it: relative, with forward slashes, "" for the whole
// shelf. It is only text here; whoever opens it does so inside the shelf's root.
func folderOf(folder string) (string, error) {
	if folder == "" {
		return "", nil
	}
	clean := path.Clean(folder)
	if !utf8.ValidString(folder) || strings.ContainsRune(folder, 0) || !filepath.IsLocal(filepath.FromSlash(clean)) {
		return "", errors.New("has to be a folder on the shelf, relative to its root")
	}
	if clean == "." {
		return "", nil
	}
	return clean, nil
}

// bytesInWords says a size for a person: "4.0 GiB".
func bytesInWords(n int64) string {
	const units = "KMGTPE"
	if n < 1024 {
		return fmt.Sprintf("%d bytes", n)
	}
	v, i := float64(n)/1024, 0
	for ; v >= 1024 && i < len(units)-1; i++ {
		v /= 1024
	}
	return fmt.Sprintf("%.1f %ciB", v, units[i])
}
