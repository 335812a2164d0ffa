package level_test

import (
	"cmp"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"sync"
	"testing"

	"evenshelf/engine/audio"
)

// entry is one measured figure.
type entry struct {
	on    string // programme, profile
	value float64
}

// sheet collects what was measured. Many may write at once.
type sheet struct {
	mu      sync.Mutex
	entries map[*row][]entry
	tables  map[string][]string // lines of the further tables, by heading
}

func newSheet() *sheet { return &sheet{entries: map[*row][]entry{}, tables: map[string][]string{}} }

func (s *sheet) note(r *row, on string, value float64) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.entries[r] = append(s.entries[r], entry{on, value})
}

// line adds a line to a further table.
func (s *sheet) line(table, format string, args ...any) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.tables[table] = append(s.tables[table], fmt.Sprintf(format, args...))
}

// worse orders entries of a row from the best to the worst; what is not a number is worst.
func (r *row) worse(a, b entry) int {
	va, vb := a.value, b.value
	if r.higher {
		va, vb = -va, -vb
	}
	return cmp.Or(cmp.Compare(badness(va), badness(vb)), strings.Compare(a.on, b.on))
}

func badness(v float64) float64 {
	if math.IsNaN(v) {
		return math.Inf(1)
	}
	return v
}

// passes reports whether a figure is within a limit, to the digits that are shown.
func (r *row) passes(v, limit float64) bool {
	if math.IsNaN(limit) {
		return true
	}
	if r.higher {
		v, limit = -v, -limit
	}
	return v <= limit+0.5*math.Pow(10, -float64(r.digits)) && !math.IsNaN(v)
}

func (r *row) number(v float64) string {
	switch {
	case math.IsNaN(v):
		return "–"
	case r.digits > 6 && v != 0:
		return fmt.Sprintf("%.1e", v)
	default:
		return audio.Number(v, r.digits)
	}
}

// verdict is what a row's figures come to.
type verdict struct {
	entries       []entry // from the best to the worst
	median, worst entry
	mark          string
	missed        []entry
}

func (s *sheet) verdict(r *row) verdict {
	v := verdict{entries: slices.Clone(s.entries[r])}
	if len(v.entries) == 0 {
		return v
	}
	slices.SortFunc(v.entries, r.worse)
	v.median, v.worst = v.entries[len(v.entries)/2], v.entries[len(v.entries)-1]
	judged := v.worst
	if r.median {
		judged = v.median
	}
	known := 0
	for _, e := range v.entries {
		if !r.passes(e.value, r.least) {
			if v.missed = append(v.missed, e); knownMisses[r.name+"/"+e.on] != "" {
				known++
			}
		}
	}
	switch {
	case len(v.missed) > known:
		v.mark = "MISSED"
	case known > 0:
		v.mark = "known miss"
	case math.IsNaN(r.aim):
		v.mark = "·"
	case r.passes(judged.value, r.aim):
		v.mark = "aim"
	default:
		v.mark = "least"
	}
	return v
}

// report prints the table and fails the test for what is missed.
func (s *sheet) report(t *testing.T) {
	t.Helper()
	var b strings.Builder
	fmt.Fprintf(&b, "\n%-10s %-70s %10s %10s %10s %10s  %s\n", "", "quantity", "aim", "at least", "median", "worst", "where (of how many)")
	for _, r := range rows {
		v := s.verdict(r)
		if v.mark == "" {
			continue
		}
		fmt.Fprintf(&b, "%-10s %-70s %10s %10s %10s %10s  %s (%d)\n", v.mark, strings.TrimSuffix(r.name+", "+r.unit, ", "), r.number(r.aim), r.number(r.least),
			r.number(v.median.value), r.number(v.worst.value), v.worst.on, len(v.entries))
	}
	t.Log(b.String())
	for _, r := range rows {
		for _, e := range s.verdict(r).missed {
			if why := knownMisses[r.name+"/"+e.on]; why != "" {
				t.Logf("known miss: %s, %s: %s, at least %s: %s", r.name, e.on, r.number(e.value), r.number(r.least), why)
			} else {
				t.Errorf("%s, %s: %s, at least %s", r.name, e.on, r.number(e.value), r.number(r.least))
			}
		}
	}
	for _, heading := range slices.Sorted(maps.Keys(s.tables)) {
		lines := slices.Sorted(slices.Values(s.tables[heading]))
		t.Logf("%s\n%s", heading, strings.Join(lines, "\n"))
	}
}
