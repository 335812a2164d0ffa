package audio

import "testing"

// 100 ms at 11.025 kHz are 1102.5 frames: every other step is one frame longer.
func TestBoundary(t *testing.T) {
	for n, want := range map[int64]int64{0: 0, 1: 1103, 2: 2205, 3: 3308, 10: 11025} {
		if got := Boundary(n, StepsPerSecond, 11025); got != want {
			t.Errorf("%d steps end at frame %d, want %d", n, got, want)
		}
	}
}
