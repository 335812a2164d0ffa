package profile

import (
	"fmt"
	"strings"
	"testing"
	"time"
)

// numberedLines is about as many lines as a text may have bytes for.
func numberedLines(format string) string {
	var b strings.Builder
	for i := 0; b.Len() < LargestFile-64; i++ {
		fmt.Fprintf(&b, format, i)
	}
	return b.String()
}

// hostile are texts of about 64 KiB that are made to be slow to read, with what is said of them.
func hostile() map[string][2]string {
	const deep, many = "is nested deeper than 8", "has many more keys"
	a := strings.Repeat("a.", 32000)
	return map[string][2]string{
		"deep table":        {"[" + a + "a]", deep},
		"deep list table":   {"[[" + a + "a]]", deep},
		"deep key":          {a + "a = 1", deep},
		"deep table, open":  {"[" + a + "a", "is not TOML"},
		"deep lists":        {"a = " + strings.Repeat("[", 9000) + strings.Repeat("]", 9000), deep},
		"deep lists, open":  {"a = " + strings.Repeat("[", 65000), "is not TOML"},
		"deep tables":       {"a = " + strings.Repeat("{a=", 9000) + "1" + strings.Repeat("}", 9000), deep},
		"nine tables":       {"a = " + strings.Repeat("{a=", 9) + "1" + strings.Repeat("}", 9), deep},
		"many keys":         {numberedLines("k%d = 1\n"), many},
		"many tables":       {numberedLines("[t.k%d]\n"), many},
		"many lists":        {strings.Repeat("[[a]]\n", 10000), many},
		"long list":         {"a = [" + strings.Repeat("1,", 32000) + "]", many},
		"wide table":        {"a = {" + numberedLines("k%d = 1, ") + "b = 1}", many},
		"long key":          {strings.Repeat("a", 65000) + " = 1", "is not a field"},
		"long number":       {"target_lufs = " + strings.Repeat("1", 65000), "is not TOML"},
		"far apart":         {strings.Repeat(strings.Repeat("\n", 160)+"a.b.c = 1\n", 380), many},
		"far apart, others": {strings.Repeat("\n", 60000) + firstLines(numberedLines("k%d = 1\n"), 300), "is not a field"},
		"comments":          {strings.Repeat("#\n", 32000), "has to be given"},
		"bytes":             {strings.Repeat("\x00\x01\xff", 20000), "is not text"},
		"one bad byte":      {strings.Repeat("# é\n", 12000) + "\xe9", "is not text in UTF-8 (line 12001)"},
		"UTF-16":            {"\xff\xfea\x00=\x00", "is not text"},
	}
}

func firstLines(s string, n int) string {
	return strings.Join(strings.SplitAfter(s, "\n")[:n], "")
}

// Whatever is sent is answered at once. What it takes is some milliseconds (see the benchmark); the limit here is for
// a machine that is busy with other things, and a hundredth of what the worst of them took when it was decoded.
func TestHostileTextsAreRefusedAtOnce(t *testing.T) {
	for what, c := range hostile() {
		start := time.Now()
		_, err := Parse("mine", []byte(c[0]))
		if took := time.Since(start); took > 300*time.Millisecond {
			t.Errorf("%s took %v", what, took)
		}
		if err == nil || !strings.Contains(err.Error(), c[1]) {
			t.Errorf("%s: %.200v; want %q", what, err, c[1])
		}
	}
	for _, p := range Builtin() { // all there is, with every field given
		if c := refused(p.TOML()); c.Words != "" {
			t.Errorf("%s: %v", p.Name, c)
		}
	}
}

func BenchmarkParseHostile(b *testing.B) {
	for what, c := range hostile() {
		b.Run(what, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Parse("mine", []byte(c[0])); err == nil {
					b.Fatal("it passes")
				}
			}
		})
	}
}
