package web

import (
	"bytes"
	"fmt"
	"html/template"
	"io/fs"
	"path"
	"strings"
	"time"

	"github.com/gin-gonic/gin"
)

// pages holds one template set a page: the layout, all components, and the page's own blocks.
type pages map[string]*template.Template

func parsePages(a *assets, now func() time.Time) (pages, error) {
	base, err := template.New("layout").Funcs(functions(a, now)).Option("missingkey=error").
		ParseFS(embedded, "pages/layout.html", "components/*/*.html")
	if err != nil {
		return nil, fmt.Errorf("web templates: %w", err)
	}
	names, err := fs.Glob(embedded, "pages/*.html")
	if err != nil {
		return nil, err
	}
	all := pages{}
	for _, file := range names {
		name := strings.TrimSuffix(path.Base(file), ".html")
		if name == "layout" {
			continue
		}
		t, err := base.Clone()
		if err == nil {
			t, err = t.ParseFS(embedded, file)
		}
		if err != nil {
			return nil, fmt.Errorf("web templates: %s: %w", file, err)
		}
		for _, block := range []string{"title", "main"} {
			if t.Lookup(block) == nil {
				return nil, fmt.Errorf("web templates: %s does not define %q", file, block)
			}
		}
		all[name] = t
	}
	return all, nil
}

// frame is what the layout needs; Page is the page's own.
type frame struct {
	Here string // the page's place in the navigation
	Page any
}

// render executes into a buffer first: a page is sent whole or not at all.
func (s *Site) render(c *gin.Context, status int, name string, page any) {
	var b bytes.Buffer
	t, ok := s.pages[name]
	err := fmt.Errorf("no page %q", name)
	if ok {
		err = t.ExecuteTemplate(&b, "layout.html", frame{Here: place(c.Request.URL.Path), Page: page})
	}
	if err != nil {
		_ = c.Error(fmt.Errorf("render %s: %w", name, err))
		c.String(500, "This page could not be made. The log says why.\n")
		return
	}
	c.Header("Cache-Control", "no-cache")
	c.Data(status, "text/html; charset=utf-8", b.Bytes())
}

// place says which entry of the navigation an address belongs to.
func place(p string) string {
	switch {
	case p == "/" || strings.HasPrefix(p, "/shelves/"):
		return "shelves"
	case strings.HasPrefix(p, "/recordings"):
		return "recordings"
	case strings.HasPrefix(p, "/runs"):
		return "runs"
	}
	return ""
}
