package audio

import (
	"encoding/json"
	"errors"
	"io"
	"math"
	"testing"
)

// A figure that is not defined is null in JSON, and null comes back as not defined.
func TestFiguresInJSON(t *testing.T) {
	for _, c := range []struct {
		in   LUFS
		want string
	}{
		{-23, "-23"}, {-22.99304999, "-22.993"}, {LUFS(math.Inf(-1)), "null"}, {LUFS(Undefined), "null"},
		{0.00001, "0"}, {-0.00001, "0"},
	} {
		got, err := json.Marshal(c.in)
		if err != nil || string(got) != c.want {
			t.Errorf("%v: got %s, %v; want %s", c.in, got, err, c.want)
		}
		var back LUFS
		if err := json.Unmarshal(got, &back); err != nil {
			t.Error(err)
		}
		if Defined(back) != (c.want != "null") || Defined(back) && math.Abs(float64(back-c.in)) > 5e-5 {
			t.Errorf("%v came back as %v", c.in, back)
		}
	}
}

func TestLinearGain(t *testing.T) {
	// 6.0206 dB is a factor of two: 20·log10(2).
	if g := DB(6.020599913).Linear(); math.Abs(g-2) > 1e-9 {
		t.Errorf("6.02 dB is a factor of %v", g)
	}
	if d := ToDB(0.5); math.Abs(d+6.020599913) > 1e-9 {
		t.Errorf("half is %v dB", d)
	}
}

func TestPositionsFollowTheMask(t *testing.T) {
	// Channel order of WAVE_FORMAT_EXTENSIBLE: ascending bits of the mask.
	side51 := Layout{6, 0x60F}
	want := []Speaker{FrontLeft, FrontRight, FrontCentre, LowFrequency, SideLeft, SideRight}
	for i, w := range want {
		if got := side51.Position(i); got != w {
			t.Errorf("5.1 with sides, channel %d: %b, want %b", i, got, w)
		}
	}
	if got := (Layout{4, 0x3}).Position(0); got != 0 {
		t.Errorf("a mask of two for four channels gives position %b, want none", got)
	}
	for n, name := range map[int]string{1: "mono", 2: "stereo", 6: "5.1", 8: "7.1", 12: "12 channels"} {
		if got := UsualLayout(n).String(); got != name {
			t.Errorf("%d channels are called %q, want %q", n, got, name)
		}
	}
	if got := (Layout{12, 0x2D63F}).String(); got != "7.1.4" {
		t.Errorf("7.1.4 is called %q", got)
	}
}

// fitful is a source that gives few frames at a time, sometimes none, and ends with err.
type fitful struct {
	left int
	err  error
}

func (f *fitful) Format() Format { return Format{48000, Mono} }

func (f *fitful) ReadBlock(dst Block) (int, error) {
	n := min(f.left, dst.Frames(), f.left%7)
	if f.left > 0 && n == 0 {
		n = min(f.left, 1)
	}
	f.left -= n
	if f.left == 0 {
		return n, f.err
	}
	return n, nil
}

func TestEachReadsToTheEnd(t *testing.T) {
	for _, end := range []error{io.EOF, io.ErrUnexpectedEOF} {
		seen := 0
		frames, err := Each(&fitful{1000, end}, func(b Block) error { seen += b.Frames(); return nil })
		if frames != 1000 || seen != 1000 {
			t.Errorf("%v: %d frames counted, %d seen, want 1000", end, frames, seen)
		}
		if end == io.EOF && err != nil || end != io.EOF && !errors.Is(err, end) {
			t.Errorf("%v came out as %v", end, err)
		}
	}
	stop := errors.New("enough")
	if _, err := Each(&fitful{1000, io.EOF}, func(Block) error { return stop }); !errors.Is(err, stop) {
		t.Errorf("the callback's error came out as %v", err)
	}
}

func TestClock(t *testing.T) {
	for s, want := range map[float64]string{0: "0:00.0", 59.94: "0:59.9", 59.96: "1:00.0", 187.5: "3:07.5", 3599.96: "1:00:00.0", 3723.44: "1:02:03.4", -1: "0:00.0"} {
		if got := Clock(s); got != want {
			t.Errorf("%g s is written %s, want %s", s, got, want)
		}
	}
}

func TestNumber(t *testing.T) {
	for _, c := range []struct {
		v        float64
		decimals int
		want     string
	}{{-18, 1, "−18.0"}, {-0.04, 1, "0.0"}, {0.05, 2, "0.05"}, {-0.25, 0, "0"}, {37.16, 1, "37.2"}} {
		if got := Number(c.v, c.decimals); got != c.want {
			t.Errorf("%g to %d decimals is %s, want %s", c.v, c.decimals, got, c.want)
		}
	}
}

func TestCount(t *testing.T) {
	for n, want := range map[int64]string{0: "0", 999: "999", 1000: "1,000", 100000: "100,000", -1234567: "-1,234,567", -123: "-123"} {
		if got := Count(n); got != want {
			t.Errorf("%d is written %s, want %s", n, got, want)
		}
	}
}
