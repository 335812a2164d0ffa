package level_test

import (
	"fmt"
	"maps"
	"os"
	"slices"
	"strings"
	"testing"
)

// heads are the columns of the further tables.
var heads = map[string]string{
	"Two voices":                     "| pauses | difference, dB | residual, LU | of the ride alone | SD of single turns | settling mean / 90 %, s | slew, dB/s | pause gain, dB | LRA, LU |",
	"Music with a wide range":        "| programme | profile | LRA, LU | rank correlation |",
	"Films":                          "| channels | strength | dialogue, LUFS | whispers | effects | LRA, LU | anchor |",
	"Formats":                        "| format, profile | foreseen off, LU | off the target by FFmpeg's meter | true peak over the ceiling, dB | renderings |",
	"Worst second":                   "| recording | s | profile | before, LU | after, LU | LRA, LU |",
	"Not left alone the second time": "| programme, profile | first came out | anchor | LRA | then: anchor and loudness | LRA | what was done then |",
	"Not delivered":                  "| programme, profile | reason |",
	"Verdicts":                       "| programme, profile | state | reason |",
}

// about says what the further tables hold.
var about = map[string]string{
	"Worst second": "Real recordings. Of all seconds, every 100 ms, of which at least eight tenths are within 20 LU of the recording's " +
		"loudness in the source: how far the loudness of the one furthest from the whole's is, before (a steady gain would leave that as it is) and after.",
	"Two voices": "24 turns of some 7 s, noise at −65 LUFS, profile talk. Settling, slew and pause gain are of its ride alone.",
}

// write writes everything as a document.
func (s *sheet) write(t *testing.T, path string) {
	t.Helper()
	var b strings.Builder
	b.WriteString("# Evaluation of the levelling engine\n\nMade by `make evaluation`; not to be edited. Composed programmes of real recordings go " +
		"through the whole engine, and what is delivered is measured by means that are not the engine's. A mark of “aim” says that every " +
		"programme meets what is aimed at (or the median does, where the row says so), “least” that every one keeps what has to be kept, " +
		"“·” that the row is only shown.\n\n" +
		"| mark | quantity | aim | at least | median | worst | where | of | how, source |\n|---|---|---|---|---|---|---|---|---|\n")
	for _, r := range rows {
		if v := s.verdict(r); v.mark != "" {
			fmt.Fprintf(&b, "| %s | %s | %s | %s | %s | %s | %s | %d | %s (%s) |\n", v.mark, strings.TrimSuffix(r.name+", "+r.unit, ", "), r.number(r.aim), r.number(r.least),
				r.number(v.median.value), r.number(v.worst.value), v.worst.on, len(v.entries), r.how, r.source)
		}
	}
	for _, r := range rows {
		for _, e := range s.verdict(r).missed {
			fmt.Fprintf(&b, "\nMissed: %s\n", strings.TrimSuffix(fmt.Sprintf("%s, %s: %s, at least %s. %s", r.name, e.on, r.number(e.value), r.number(r.least), knownMisses[r.name+"/"+e.on]), " "))
		}
	}
	for _, heading := range slices.Sorted(maps.Keys(s.tables)) {
		head := heads[heading]
		fmt.Fprintf(&b, "\n## %s\n\n", heading)
		if words := about[heading]; words != "" {
			fmt.Fprintf(&b, "%s\n\n", words)
		}
		fmt.Fprintf(&b, "%s\n%s\n%s\n", head, strings.Repeat("|---", strings.Count(head, "|")-1)+"|", strings.Join(slices.Sorted(slices.Values(s.tables[heading])), "\n"))
	}
	if err := os.WriteFile(path, []byte(b.String()), 0o644); err != nil {
		t.Fatal(err)
	}
}
