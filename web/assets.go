package web

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
	"io/fs"
	"mime"
	"net/http"
	"path"
	"slices"
	"strings"

	"github.com/gin-gonic/gin"
)

//go:embed pages components static
var embedded embed.FS

// types are the files a browser may fetch; templates lie in the same tree and are not among them.
var types = map[string]string{
	".css":   "text/css; charset=utf-8",
	".js":    "text/javascript; charset=utf-8",
	".svg":   "image/svg+xml",
	".woff2": "font/woff2",
	".txt":   mime.FormatMediaType("text/plain", map[string]string{"charset": "utf-8"}),
}

// assets are the files served under /static/<hash>/. The hash covers all of them, so that modules can import
// each other by relative path and still be cached for good.
type assets struct {
	hash  string
	files map[string][]byte // by path below the hash, e.g. "components/spine/spine.js"
}

func loadAssets() (*assets, error) {
	a := &assets{files: map[string][]byte{}}
	sum := sha256.New()
	err := fs.WalkDir(embedded, ".", func(p string, d fs.DirEntry, err error) error { // in lexical order
		if err != nil || d.IsDir() || types[path.Ext(p)] == "" {
			return err
		}
		b, err := embedded.ReadFile(p)
		if err != nil {
			return err
		}
		name := strings.TrimPrefix(p, "static/")
		a.files[name] = b
		fmt.Fprintf(sum, "%s %d\n", name, len(b))
		sum.Write(b)
		return nil
	})
	a.hash = hex.EncodeToString(sum.Sum(nil)[:6])
	return a, err
}

// url is the address of a static file; a name that does not exist is an error, so a page with a dead link
// cannot be rendered.
func (a *assets) url(name string) (string, error) {
	if _, ok := a.files[name]; !ok {
		return "", fmt.Errorf("no static file %q", name)
	}
	return "/static/" + a.hash + "/" + name, nil
}

// sheets lists the components' style sheets in a fixed order.
func (a *assets) sheets() []string {
	var names []string
	for name := range a.files {
		if strings.HasPrefix(name, "components/") && path.Ext(name) == ".css" {
			names = append(names, name)
		}
	}
	slices.Sort(names)
	return names
}

func (a *assets) serve(c *gin.Context) {
	name := strings.TrimPrefix(c.Param("path"), "/")
	b, ok := a.files[name]
	if !ok || c.Param("hash") != a.hash {
		// An address of another version must not be answered with this one's bytes: it would be kept for good.
		c.Header("Cache-Control", "no-store")
		c.String(http.StatusNotFound, "no such file in this version\n")
		return
	}
	c.Header("Cache-Control", "public, max-age=31536000, immutable")
	c.Data(http.StatusOK, types[path.Ext(name)], b)
}
