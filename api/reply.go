package api

import (
	"bytes"
	"compress/gzip"
	"encoding/json"
	"io"
	"net/http"
	"strconv"
	"strings"
	"time"

	"github.com/gin-gonic/gin"
)

// handler answers one route with a status and a value, or an error.
type handler func(c *gin.Context) (status int, body any, err error)

// sender is a body that writes itself: a sound, a stream. It sets the headers it needs; an error it returns
// before the first byte still becomes a problem document.
type sender interface {
	send(c *gin.Context, status int) error
}

// handle is the one place where replies are written.
func (a *API) handle(h handler) gin.HandlerFunc {
	return func(c *gin.Context) {
		status, body, err := h(c)
		if err == nil {
			if s, ok := body.(sender); ok {
				err = s.send(c, status)
			} else {
				err = sendJSON(c, status, "application/json", body)
			}
		}
		if err != nil {
			a.fail(c, err)
		}
	}
}

// fail writes the problem that err is, or cuts the connection if part of a reply is already out: a client
// must not take half a reply for a whole one.
func (a *API) fail(c *gin.Context, err error) {
	p := problemOf(err)
	ctx := c.Request.Context()
	unplanned := p.Status == http.StatusInternalServerError || c.Writer.Written()
	switch {
	case unplanned && ctx.Err() != nil: // the client has gone or the service stops: nobody's fault
		a.Log.DebugContext(ctx, "request ended early", "method", c.Request.Method, "path", c.Request.URL.Path, "error", err)
		p = unavailable("the service is stopping")
	case unplanned:
		a.Log.ErrorContext(ctx, "request failed", "method", c.Request.Method, "path", c.Request.URL.Path, "error", err)
	}
	if c.Writer.Written() {
		panic(http.ErrAbortHandler)
	}
	a.refuse(c, p)
}

// refuse ends the request with a problem document.
func (a *API) refuse(c *gin.Context, p *problem) {
	c.Abort()
	for _, name := range []string{"Content-Encoding", "ETag", "Content-Disposition", "Last-Modified"} {
		c.Writer.Header().Del(name) // they described the reply that was meant to be
	}
	if err := sendJSON(c, p.Status, "application/problem+json", p); err != nil {
		a.Log.DebugContext(c.Request.Context(), "problem not delivered", "error", err)
	}
}

// sendJSON encodes first and writes afterwards, so that a value that cannot be encoded is a clean 500.
func sendJSON(c *gin.Context, status int, contentType string, body any) error {
	var b bytes.Buffer
	if err := json.NewEncoder(&b).Encode(body); err != nil {
		return err
	}
	c.Header("Cache-Control", "no-store")
	return sendBytes(c, status, contentType, b.Bytes())
}

// gzipFrom is the size below which compressing costs more than it saves.
const gzipFrom = 4 << 10

func sendBytes(c *gin.Context, status int, contentType string, body []byte) error {
	c.Header("Content-Type", contentType)
	if len(body) >= gzipFrom {
		return sendStream(c, status, func(w io.Writer) error {
			_, err := w.Write(body)
			return err
		})
	}
	c.Header("Content-Length", strconv.Itoa(len(body)))
	c.Status(status)
	_, err := c.Writer.Write(body)
	return err
}

// sendStream sends what write writes, compressed if the client takes gzip. The fastest level: the client
// is usually on the same machine or network.
func sendStream(c *gin.Context, status int, write func(w io.Writer) error) error {
	c.Header("Vary", "Accept-Encoding")
	c.Status(status)
	w := patient(c)
	if !acceptsGzip(c.Request.Header.Get("Accept-Encoding")) {
		return write(w)
	}
	c.Header("Content-Encoding", "gzip")
	zw, err := gzip.NewWriterLevel(w, gzip.BestSpeed)
	if err != nil {
		return err
	}
	if err := write(zw); err != nil {
		return err
	}
	return zw.Close()
}

// acceptsGzip reads an Accept-Encoding header (RFC 9110, 12.5.3): gzip by name or by *, unless its q is 0.
func acceptsGzip(header string) bool {
	star := false
	for item := range strings.SplitSeq(header, ",") {
		name, params, _ := strings.Cut(strings.ToLower(strings.TrimSpace(item)), ";")
		q, isQ := strings.CutPrefix(strings.TrimSpace(params), "q=")
		weight, err := strconv.ParseFloat(q, 64)
		wanted := !isQ || (err == nil && weight > 0)
		switch strings.TrimSpace(name) {
		case "gzip", "x-gzip":
			return wanted
		case "*":
			star = wanted
		}
	}
	return star
}

// idle is how long a client may stall in the middle of a long transfer before it is given up.
const idle = time.Minute

// patientWriter gives each write its own deadline instead of one for the whole reply: an hour of sound may
// take an hour to play, yet a client that stops reading does not hold a connection for ever.
type patientWriter struct {
	w  gin.ResponseWriter
	rc *http.ResponseController
}

// patient lifts the server's deadlines for a long reply; the read deadline too, because the server watches
// the connection while a handler runs and would take its passing for a client that has gone. A connection
// without deadlines (a test recorder) is patient already, hence the ignored errors here and below.
func patient(c *gin.Context) patientWriter {
	rc := http.NewResponseController(c.Writer)
	_ = rc.SetReadDeadline(time.Time{})
	return patientWriter{c.Writer, rc}
}

func (p patientWriter) Write(b []byte) (int, error) {
	_ = p.rc.SetWriteDeadline(time.Now().Add(idle))
	return p.w.Write(b)
}

// patientReader does the same for a long request body.
type patientReader struct {
	r  io.Reader
	rc *http.ResponseController
}

func (p patientReader) Read(b []byte) (int, error) {
	_ = p.rc.SetReadDeadline(time.Now().Add(idle))
	return p.r.Read(b)
}
