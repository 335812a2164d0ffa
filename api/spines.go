package api

import (
	"bufio"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/http"
	"strconv"
	"strings"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

// spines is a whole shelf as the spine chart wants it: a table without repeated names, because a shelf may
// hold 100,000 recordings and each is one row.
type spines struct {
	target *float64 // of the shelf's latest run, LUFS
	rows   []store.Spine
}

func (a *API) showSpines(c *gin.Context) (int, any, error) {
	shelf, err := a.pathShelf(c)
	if err != nil {
		return 0, nil, err
	}
	rows, err := a.Store.Spines(c.Request.Context(), shelf.ID)
	if err != nil {
		return 0, nil, err
	}
	s := spines{rows: rows}
	if shelf.LastRun != nil {
		s.target = &shelf.LastRun.Target
	}
	return http.StatusOK, s, nil
}

// send writes the table twice: first into a hash, which becomes the entity tag, then, if the client does not
// have it already, to the client. That costs some milliseconds and saves holding 10 MB of text.
func (s spines) send(c *gin.Context, status int) error {
	sum := sha256.New()
	if err := s.write(sum); err != nil {
		return err
	}
	tag := fmt.Sprintf(`W/"%x"`, sum.Sum(nil)[:12]) // weak: gzip changes the bytes but not what they say
	c.Header("ETag", tag)
	c.Header("Cache-Control", "no-cache")
	c.Header("Vary", "Accept-Encoding")
	if matches(c.GetHeader("If-None-Match"), tag) {
		c.Status(http.StatusNotModified)
		c.Writer.WriteHeaderNow()
		return nil
	}
	c.Header("Content-Type", "application/json")
	return sendStream(c, status, s.write)
}

// matches compares entity tags weakly, as If-None-Match does (RFC 9110, 13.1.2).
func matches(header, tag string) bool {
	for t := range strings.SplitSeq(header, ",") {
		t = strings.TrimSpace(t)
		if t == "*" || strings.TrimPrefix(t, "W/") == strings.TrimPrefix(tag, "W/") {
			return true
		}
	}
	return false
}

func (s spines) write(to io.Writer) error {
	w := bufio.NewWriterSize(to, 32<<10)
	b := append(appendFigure([]byte(`{"target_lufs":`), s.target), `,"columns":["id","path","state",`+
		`"before_lufs","before_p10","before_p95","before_peak",`+
		`"after_lufs","after_p10","after_p95","after_peak"],"rows":[`...)
	for i, row := range s.rows {
		if i > 0 {
			b = append(b, ',', '\n')
		}
		path, err := json.Marshal(row.Path)
		if err != nil {
			return err
		}
		b = append(strconv.AppendInt(append(b, '['), row.ID, 10), ',')
		b = append(append(b, path...), `,"`...)
		b = append(append(b, row.State...), '"')
		b = append(appendFigures(appendFigures(b, row.Before), row.After), ']')
		if _, err := w.Write(b); err != nil {
			return err
		}
		b = b[:0]
	}
	if _, err := w.Write(append(b, "]}\n"...)); err != nil {
		return err
	}
	return w.Flush()
}

func appendFigures(b []byte, f *store.Figures) []byte {
	if f == nil {
		f = &store.Figures{}
	}
	for _, v := range [...]*float64{f.Integrated, f.ShortTerm10, f.ShortTerm95, f.TruePeak} {
		b = appendFigure(append(b, ','), v)
	}
	return b
}

// appendFigure writes two decimals, which is more than a chart can show.
func appendFigure(b []byte, v *float64) []byte {
	if v == nil {
		return append(b, "null"...)
	}
	return appendRounded(b, *v, 100)
}

// appendRounded writes v to 1/steps as short as JSON allows; what JSON cannot say is null.
func appendRounded(b []byte, v, steps float64) []byte {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return append(b, "null"...)
	}
	r := math.Round(v*steps) / steps
	if r == 0 {
		r = 0 // not "-0"
	}
	return strconv.AppendFloat(b, r, 'f', -1, 64)
}
