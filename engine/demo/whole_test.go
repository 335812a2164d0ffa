//go:build !race

package demo

// The tests in this file make and measure the whole shelf: under the race detector, which has nothing to
// find in arithmetic, they would take minutes. demo_test.go has the tests of everything concurrent.

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"sync"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
)

// shelf is the demo shelf, written once for all tests.
var shelf struct {
	once  sync.Once
	dir   string
	items []Item
	err   error
}

func TestMain(m *testing.M) {
	code := m.Run()
	if shelf.dir != "" {
		os.RemoveAll(shelf.dir)
	}
	os.Exit(code)
}

// written returns the folder of the demo shelf and its items.
func written(t *testing.T) (string, []Item) {
	t.Helper()
	tools := toolbox(t)
	shelf.once.Do(func() {
		if shelf.dir, shelf.err = os.MkdirTemp("", "demo-shelf-"); shelf.err == nil {
			shelf.items, shelf.err = Write(context.Background(), tools, shelf.dir, nil)
		}
	})
	if shelf.err != nil {
		t.Fatal(shelf.err)
	}
	return shelf.dir, shelf.items
}

// reading measures decoded sound.
func reading(t *testing.T, f audio.Format, b audio.Block) meter.Reading {
	t.Helper()
	m, err := meter.New(f, audio.OneChannel)
	if err != nil {
		t.Fatal(err)
	}
	m.Write(b)
	r, _ := m.Finish()
	return r
}

// TestShelfMeasures reads every sound item back from disk and holds it to what the shelf promises. With -v
// it prints the whole shelf as a table.
func TestShelfMeasures(t *testing.T) {
	dir, items := written(t)
	tools := toolbox(t)
	lowest, highest := audio.LUFS(0), audio.LUFS(-100)
	var table strings.Builder
	fmt.Fprintf(&table, "\n%-42s %-10s %6s %5s %-6s %7s %6s %7s %5s\n", "item", "format", "Hz", "s", "", "LUFS", "LRA", "dBTP", "PLR")
	for _, it := range items {
		if it.Damaged {
			continue
		}
		info, b := sound(t, tools, filepath.Join(dir, filepath.FromSlash(it.Path)))
		if info.Format != it.Spec.Format {
			t.Errorf("%s: decodes to %v, spec says %v", it.Path, info.Format, it.Spec.Format)
		}
		m := reading(t, info.Format, b)
		fmt.Fprintf(&table, "%-42.42s %-10s %6d %5.1f %-6s %7.2f %6.1f %7.2f %5.1f\n", it.Path, info.FormatName(), m.SampleRate,
			m.Duration, info.Format.Layout, m.Integrated, m.Range, m.TruePeak, m.PLR)

		tolerance := 0.03 // the builder stops within 0.02
		if it.Spec.BitDepth == 0 {
			tolerance = 0.6 // MP3 encoders turn their input down by up to 5 % (−0.45 dB)
		}
		if miss := math.Abs(float64(m.Integrated - it.Loudness)); !(miss <= tolerance) {
			t.Errorf("%s: %.2f LUFS, promised %.2f", it.Path, m.Integrated, it.Loudness)
		}
		// What it takes to reach −18 LUFS under −1 dBTP: up to 40 dB of lift, up to 10 dB of limiting.
		if lift := -18 - m.Integrated; lift > 40 {
			t.Errorf("%s: needs %.1f dB of lift", it.Path, lift)
		}
		if limiting := float64(m.TruePeak) + float64(-18-m.Integrated) + 1; limiting > 9 || m.PLR > 25 {
			t.Errorf("%s: needs %.1f dB of limiting (PLR %.1f)", it.Path, limiting, m.PLR)
		}
		if run := flatTop(b); it.Spec.BitDepth != 0 && run > 3 {
			t.Errorf("%s: %d equal samples in a row at its highest: looks clipped", it.Path, run)
		}
		if it.Spec.BitDepth != 0 && m.SamplePeak > -0.2 {
			t.Errorf("%s: sample peak %.2f dBFS", it.Path, m.SamplePeak)
		}
		lowest, highest = min(lowest, m.Integrated), max(highest, m.Integrated)

		switch it.Path {
		case "concert/tide-over-the-sea-wall.flac":
			if !(m.Range > 15) || m.Duration < 60 {
				t.Errorf("%s: LRA %.1f LU over %.0f s, want > 15 over at least 60", it.Path, m.Range, m.Duration)
			}
		case "music/level-crossing-strut.wav":
			if math.Abs(float64(m.Integrated+18)) > 0.1 || m.TruePeak > -1 {
				t.Errorf("%s: %.2f LUFS, %.2f dBTP: not to be left untouched", it.Path, m.Integrated, m.TruePeak)
			}
		}
	}
	t.Log(table.String())
	if lowest > -41 || highest < -7.6 {
		t.Errorf("loudness from %.1f to %.1f LUFS, want −42 … −7", lowest, highest)
	}
}

// TestShelfSecondOpinion lets FFmpeg's meter read some items.
func TestShelfSecondOpinion(t *testing.T) {
	dir, items := written(t)
	tools := toolbox(t)
	summary := regexp.MustCompile(`(?s)Summary:.*I:\s+(\S+) LUFS`)
	for _, it := range items {
		switch it.Path {
		case "music/level-crossing-strut.wav", "talk/whispered-from-the-hide.wav", "jingles/half-past.wav", "film/scene-31-tide-room.wav":
		default:
			continue
		}
		out, err := exec.CommandContext(t.Context(), tools.FFmpeg(), "-nostdin", "-nostats", "-i", filepath.Join(dir, it.Path), "-af", "ebur128", "-f", "null", "-").CombinedOutput()
		m := summary.FindSubmatch(out)
		if err != nil || m == nil {
			t.Fatalf("%s: %v\n%s", it.Path, err, out)
		}
		lufs, err := strconv.ParseFloat(string(m[1]), 64)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(lufs-float64(it.Loudness)) > 0.1 {
			t.Errorf("%s: FFmpeg reads %.1f LUFS, promised %.1f", it.Path, lufs, it.Loudness)
		}
	}
}

func TestShelfIsSmall(t *testing.T) {
	dir, _ := written(t)
	var bytes int64
	if err := filepath.WalkDir(dir, func(_ string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		if err == nil {
			bytes += info.Size()
		}
		return err
	}); err != nil {
		t.Fatal(err)
	}
	t.Logf("%.1f MB", float64(bytes)/1e6)
	if bytes > 60e6 {
		t.Errorf("the shelf takes %.1f MB, want less than 60", float64(bytes)/1e6)
	}
}
