package web

import (
	"fmt"
	"html/template"
	"math"
	"path"
	"reflect"
	"strings"
	"time"

	"evenshelf/engine/audio"
)

const narrow = "\u202f" // a space that does not break

// functions are what templates may call. Figures arrive as any float type or a pointer to one.
func functions(a *assets, now func() time.Time) template.FuncMap {
	return template.FuncMap{
		"static":   a.url,
		"sheets":   a.sheets,
		"figure":   func(v any, unit string) figure { return newFigure(v, unit) },
		"number":   func(v any) string { f, _ := value(v); return audio.Number(f, 1) },
		"spread":   func(v any) string { f, _ := value(v); return spreadWords(f) },
		"signed":   func(v any) string { f, _ := value(v); return signed(f) },
		"count":    func(n any) string { return audio.Count(reflect.ValueOf(n).Int()) },
		"plural":   plural,
		"length":   func(v any) string { f, ok := value(v); return length(f, ok) },
		"clock":    audio.Clock,
		"bytes":    size,
		"when":     func(t any) string { return when(t, now()) },
		"stamp":    stamp,
		"base":     path.Base,
		"folder":   folder,
		"spark":    newSpark,
		"stateSay": stateWords,
		"outcome":  newOutcome,
		"listen":   newListen,
		"doubtful": newDoubtful,
		"doubtSay": doubtWords,
		"bitrates": bitRates,
		"askall":   func(of string, id int64, asks string) restoreAll { return restoreAll{of, id, asks} },
	}
}

// value reads a float out of a pointer or a defined type; false where there is none or it is not finite.
func value(v any) (float64, bool) {
	r := reflect.ValueOf(v)
	if r.Kind() == reflect.Pointer {
		if r.IsNil() {
			return math.NaN(), false
		}
		r = r.Elem()
	}
	if !r.IsValid() || !r.CanFloat() {
		return math.NaN(), false
	}
	f := r.Float()
	return f, !math.IsNaN(f) && !math.IsInf(f, 0)
}

// known is a figure where it is defined, else nil.
func known[F ~float64](f F) *float64 {
	if !audio.Defined(f) {
		return nil
	}
	v := float64(f)
	return &v
}

// spreadWords writes a difference to one decimal; one that would read 0.0 is said to be small, not none.
func spreadWords(f float64) string {
	if f < 0.05 {
		return "less than 0.1"
	}
	return audio.Number(f, 1)
}

// figure is a number with its unit, or the dash that stands for one that is not defined.
type figure struct {
	Defined    bool
	Text, Unit string
}

func newFigure(v any, unit string) figure {
	f, _ := value(v)
	return decimals(f, 1, unit)
}

// decimals is newFigure with another count of decimals.
func decimals(f float64, n int, unit string) figure {
	if !audio.Defined(f) {
		return figure{}
	}
	return figure{true, audio.Number(f, n), unit}
}

// signed is audio.Number with a plus where it is one: for differences and gains.
func signed(f float64) string {
	s := audio.Number(f, 1)
	if f > 0 && strings.Trim(s, "0.") != "" {
		return "+" + s
	}
	return s
}

// plural is a count with the word for it: "1 recording", "96 recordings".
func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return audio.Count(n) + " " + many
}

// length writes a duration in seconds the way people say it: 6 h 12 min, 3 min 24 s, 8.2 s.
func length(s float64, ok bool) string {
	switch {
	case !ok || s < 0:
		return "–"
	case s < 9.95:
		return audio.Number(s, 1) + narrow + "s"
	case s < 59.5:
		return audio.Number(s, 0) + narrow + "s"
	}
	if t := int64(math.Round(s)); t < 3600 {
		return fmt.Sprintf("%d%smin %d%ss", t/60, narrow, t%60, narrow)
	}
	m := int64(math.Round(s / 60))
	return fmt.Sprintf("%s%sh %d%smin", audio.Count(m/60), narrow, m%60, narrow)
}

// size writes a file's size in decimal units.
func size(n int64) string {
	f := float64(n)
	for _, unit := range []string{"bytes", "kB", "MB", "GB"} {
		if f < 1000 {
			if unit == "bytes" {
				return audio.Count(n) + narrow + unit
			}
			return audio.Number(f, 1) + narrow + unit
		}
		f /= 1000
	}
	return audio.Number(f, 1) + narrow + "TB"
}

// moment takes a time or a pointer to one.
func moment(v any) (time.Time, bool) {
	switch t := v.(type) {
	case time.Time:
		return t, !t.IsZero()
	case *time.Time:
		if t != nil {
			return *t, true
		}
	}
	return time.Time{}, false
}

// when says a time as a person would on the day they read it, in the server's time zone.
func when(v any, now time.Time) string {
	t, ok := moment(v)
	if !ok {
		return "–"
	}
	t, now = t.Local(), now.Local()
	day := func(t time.Time) time.Time {
		return time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, time.UTC)
	}
	switch days := int(day(now).Sub(day(t)).Hours() / 24); {
	case days == 0:
		return "today at " + t.Format("15:04")
	case days == 1:
		return "yesterday at " + t.Format("15:04")
	case t.Year() == now.Year():
		return t.Format("2 January at 15:04")
	}
	return t.Format("2 January 2006")
}

// stamp is the exact time for a machine, and for whoever hovers.
func stamp(v any) string {
	t, ok := moment(v)
	if !ok {
		return ""
	}
	return t.UTC().Format(time.RFC3339)
}

// folder is the folder part of a recording's path, "" at the shelf's root.
func folder(p string) string {
	if d := path.Dir(p); d != "." {
		return d + "/"
	}
	return ""
}
