package audio

import (
	"errors"
	"io"
	"runtime"
	"testing"
	"time"
)

// counting is a source of a number of frames that count up, in blocks of uneven length, and ends with an error.
type counting struct {
	at, end int
	err     error
}

func (s *counting) Format() Format { return Format{Rate: 48000, Layout: Stereo} }

func (s *counting) ReadBlock(dst Block) (n int, err error) {
	for n < dst.Frames()-s.at%977 && s.at < s.end {
		dst[0][n], dst[1][n] = float32(s.at), -float32(s.at)
		s.at++
		n++
	}
	if s.at == s.end {
		err = s.err
	}
	return n, err
}

// Every listener hears every frame in order, however they keep up, and the error comes through.
func TestSpread(t *testing.T) {
	torn := errors.New("torn")
	for _, test := range []struct{ with, want error }{{io.EOF, nil}, {torn, torn}} {
		const frames = 300_000
		heard := make([]int, 3)
		listeners := make([]func(Block), len(heard))
		for i := range heard {
			listeners[i] = func(b Block) {
				for j, v := range b[0] {
					if v != float32(heard[i]) || b[1][j] != -v {
						t.Errorf("listener %d heard %v and %v as frame %d", i, v, b[1][j], heard[i])
						return
					}
					heard[i]++
				}
				if i == 1 { // one that lags behind
					time.Sleep(50 * time.Microsecond)
				}
			}
		}
		n, err := Spread(&counting{end: frames, err: test.with}, listeners[0], listeners[1:]...)
		if n != frames || err != test.want {
			t.Errorf("%d frames and %v, want %d and %v", n, err, frames, test.want)
		}
		for i, h := range heard {
			if h != frames {
				t.Errorf("listener %d heard %d frames of %d", i, h, frames)
			}
		}
	}
}

// broken is a source that panics at its third block.
type broken struct{ counting }

func (s *broken) ReadBlock(dst Block) (int, error) {
	if s.at > 2*BlockFrames {
		panic("reader")
	}
	return s.counting.ReadBlock(dst)
}

// Whoever panics, the caller gets to know, and nobody is left waiting.
func TestSpreadPanics(t *testing.T) {
	before := runtime.NumGoroutine()
	fine, faulty := func(Block) {}, func(Block) { panic("listener") }
	for want, spread := range map[string]func(){
		"reader":   func() { Spread(&broken{counting{end: 1e6}}, fine, fine) },
		"listener": func() { Spread(&counting{end: 1e6, err: io.EOF}, fine, faulty, fine) },
	} {
		func() {
			defer func() {
				if got := recover(); got != want {
					t.Errorf("the caller sees %v, want %q", got, want)
				}
			}()
			spread()
		}()
	}
	func() {
		defer func() {
			if got := recover(); got != "listener" {
				t.Errorf("the caller of a first listener that panics sees %v", got)
			}
		}()
		Spread(&counting{end: 1e6, err: io.EOF}, faulty, fine)
	}()
	if after := runtime.NumGoroutine(); after > before {
		t.Errorf("%d goroutines before, %d after", before, after)
	}
}
