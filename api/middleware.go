package api

import (
	"fmt"
	"net"
	"net/http"
	"runtime/debug"
	"slices"
	"strings"
	"time"

	"github.com/gin-gonic/gin"
)

// recoverPanics turns a bug into a bare 500 and a log line with the stack. http.ErrAbortHandler is not a
// bug but the way to cut a connection, so it passes.
func (a *API) recoverPanics(c *gin.Context) {
	defer func() {
		cause := recover()
		if cause == nil {
			return
		}
		if cause == http.ErrAbortHandler {
			panic(cause)
		}
		a.Log.Error("panic", "method", c.Request.Method, "path", c.Request.URL.Path,
			"cause", fmt.Sprint(cause), "stack", string(debug.Stack()))
		if c.Writer.Written() {
			panic(http.ErrAbortHandler)
		}
		a.refuse(c, kindInternal.with(""))
	}()
	c.Next()
}

func (a *API) logRequest(c *gin.Context) {
	start := time.Now()
	defer func() {
		a.Log.DebugContext(c.Request.Context(), "request", "method", c.Request.Method, "path", c.Request.URL.Path,
			"status", c.Writer.Status(), "bytes", max(c.Writer.Size(), 0), "duration", time.Since(start))
	}()
	c.Next()
}

// checkHost refuses requests addressed to a name the operator did not list. A page on any site can point
// its own name at this machine's address (DNS rebinding); then it shares our origin, but not our name.
func (a *API) checkHost(c *gin.Context) {
	if a.Hosts == nil {
		return
	}
	asked := hostName(c.Request.Host)
	if !slices.ContainsFunc(a.Hosts, func(h string) bool { return asked != "" && hostName(h) == asked }) {
		a.refuse(c, kindHost.with("this service does not answer to the host name in the request"))
	}
}

// hostName strips port, brackets and a closing dot, and folds case: "[::1]:80" → "::1".
func hostName(host string) string {
	if name, _, err := net.SplitHostPort(host); err == nil {
		host = name
	}
	host = strings.TrimSuffix(strings.TrimPrefix(host, "["), "]")
	return strings.ToLower(strings.TrimSuffix(host, "."))
}

var crossOrigin = http.NewCrossOriginProtection()

// checkOrigin refuses changes that a browser was told to make by a page of another site.
func (a *API) checkOrigin(c *gin.Context) {
	if crossOrigin.Check(c.Request) != nil {
		a.refuse(c, kindCrossOrigin.with("changes are taken from this service's own pages and from programs only"))
	}
}

// bodyLimit is the largest JSON request: a run that lists some 500,000 recordings.
const bodyLimit = 4 << 20

// limitBody bounds every request body; the upload handler, whose bodies are files, sets its own bounds.
func limitBody(c *gin.Context) {
	if c.FullPath() != uploadPath {
		c.Request.Body = http.MaxBytesReader(c.Writer, c.Request.Body, bodyLimit)
	}
}

// unrouted answers requests below /api that no route takes. It is middleware, not gin's NoRoute, because
// that is one for the whole engine and belongs to whoever serves the pages.
func (a *API) unrouted(c *gin.Context) {
	path := c.Request.URL.Path
	if c.FullPath() != "" || (path != "/healthz" && path != "/api" && !strings.HasPrefix(path, "/api/")) {
		return
	}
	if c.Writer.Status() == http.StatusMethodNotAllowed { // gin has set it, and the Allow header
		a.refuse(c, kindMethod.with(c.Request.Method+" is not a method of this address; see the Allow header"))
		return
	}
	a.refuse(c, notFound("there is nothing at this address"))
}

// safeHeaders keeps browsers from guessing a content type, and other sites from embedding sounds.
func safeHeaders(c *gin.Context) {
	c.Header("X-Content-Type-Options", "nosniff")
	c.Header("Cross-Origin-Resource-Policy", "same-origin")
}
