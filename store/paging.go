package store

import (
	"encoding/base64"
	"encoding/json"
	"fmt"
	"strings"
)

// Paging is by key, not by offset: a page begins after the last row of the page before, so a row that
// appears or vanishes meanwhile neither repeats nor hides another, and page 1,000 costs what page 1 does.
//
// Rows that have no value for the order come last, whichever way it runs. A page is therefore put together
// from two ranges of one index: first the rows with a value, in order of (value, id), then those without,
// in order of id. Ties are broken by id in the same direction.

// sortKey is an order that a list of recordings can have.
type sortKey struct {
	column string
	always bool                 // every row has a value
	value  func(*Recording) any // string, int64, float64, or nil when there is none
}

var sortKeys = map[string]sortKey{
	"path":     {"path", true, func(r *Recording) any { return r.Path }},
	"added":    {"added_at", true, func(r *Recording) any { return r.AddedAt.UnixMilli() }},
	"state":    {"state", true, func(r *Recording) any { return string(r.State) }},
	"duration": {"duration", false, func(r *Recording) any { return orNil(r.Duration) }},
	"before":   {"before_integrated", false, func(r *Recording) any { return figure(r.Before, (*Figures).integrated) }},
	"after":    {"after_integrated", false, func(r *Recording) any { return figure(r.After, (*Figures).integrated) }},
	"range":    {"before_range", false, func(r *Recording) any { return figure(r.Before, (*Figures).lra) }},
	"peak":     {"before_peak", false, func(r *Recording) any { return figure(r.Before, (*Figures).truePeak) }},
}

func (f *Figures) integrated() *float64 { return f.Integrated }
func (f *Figures) lra() *float64        { return f.Range }
func (f *Figures) truePeak() *float64   { return f.TruePeak }

func figure(f *Figures, get func(*Figures) *float64) any {
	if f == nil {
		return nil
	}
	return orNil(get(f))
}

func orNil(v *float64) any {
	if v == nil {
		return nil
	}
	return *v
}

// cursor is where a page ended. It is opaque to callers: base64url of this as JSON.
type cursor struct {
	Sort   string   `json:"s"`
	Desc   bool     `json:"d,omitempty"`
	ID     int64    `json:"i"`
	Text   *string  `json:"t,omitempty"` // the value, by its type; none of them: the row had no value
	Int    *int64   `json:"n,omitempty"`
	Number *float64 `json:"f,omitempty"`
}

func cursorAfter(sort string, desc bool, r *Recording) string {
	c := cursor{Sort: sort, Desc: desc, ID: r.ID}
	switch v := sortKeys[sort].value(r).(type) {
	case string:
		c.Text = &v
	case int64:
		c.Int = &v
	case float64:
		c.Number = &v
	}
	b, err := json.Marshal(c)
	if err != nil {
		panic(err) // a struct of strings and finite numbers always marshals
	}
	return base64.RawURLEncoding.EncodeToString(b)
}

func parseCursor(text, sort string, desc bool) (c cursor, err error) {
	b, err := base64.RawURLEncoding.DecodeString(text)
	if err == nil {
		err = json.Unmarshal(b, &c)
	}
	if err != nil || c.Sort != sort || c.Desc != desc {
		return c, fmt.Errorf("the cursor is not from a list in this order: %w", ErrInvalid)
	}
	return c, nil
}

// value returns what the cursor's row had for the order, nil if nothing.
func (c cursor) value() any {
	switch {
	case c.Text != nil:
		return *c.Text
	case c.Int != nil:
		return *c.Int
	case c.Number != nil:
		return *c.Number
	}
	return nil
}

// conditions builds a WHERE clause; every value is bound.
type conditions struct {
	terms []string
	args  []any
}

func (w *conditions) add(term string, args ...any) {
	w.terms = append(w.terms, term)
	w.args = append(w.args, args...)
}

func (w *conditions) where() string {
	if len(w.terms) == 0 {
		return ""
	}
	return " WHERE " + strings.Join(w.terms, " AND ")
}

// with returns the conditions and one more, leaving w as it is.
func (w *conditions) with(term string, args ...any) conditions {
	return conditions{append(w.terms[:len(w.terms):len(w.terms)], term), append(w.args[:len(w.args):len(w.args)], args...)}
}

// folder adds "lies below folder" as a range an index can serve: 'a/' ≤ path < 'a0', '0' being the
// character after '/'. So "a" matches "a/x" but neither "ab/x" nor "a" itself, and no wildcard can slip in.
func (w *conditions) folder(column, folder string) {
	if folder != "" {
		w.add(column+" >= ? AND "+column+" < ?", folder+"/", folder+"0")
	}
}

func pageLimit(limit int) (int, error) {
	switch {
	case limit == 0:
		return 100, nil
	case limit < 1 || limit > 1000:
		return 0, fmt.Errorf("limit %d is not between 1 and 1000: %w", limit, ErrInvalid)
	}
	return limit, nil
}
