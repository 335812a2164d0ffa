package faults

import (
	"fmt"

	"evenshelf/engine/audio"
)

// Floating-point files may pass full scale, but by no more than gain was ever turned up by. Far beyond lies
// a damaged number, or a file whose samples count in other units: its loudness means nothing, and one gain
// for all of it may leave nothing to hear. Common practice, no source.
const scaleMost = 60.0 // dBFS

// nothing is a detector that a format leaves nothing to do.
type nothing struct{}

func (nothing) look(window)           {}
func (nothing) faults(extent) []Fault { return nil }

// scale finds recordings with samples that no full scale explains.
type scale struct{}

func (scale) look(window) {}

func (scale) faults(e extent) []Fault {
	peak := 0.0
	for _, p := range e.peak {
		peak = max(peak, float64(p))
	}
	over := audio.ToDB(peak)
	if over <= scaleMost {
		return nil
	}
	return []Fault{{Code: "scale", Severity: Doubt, Length: e.Seconds(e.frames),
		Words: fmt.Sprintf("its highest sample lies %.0f dB over full scale: it is damaged, or counts in other units", over)}}
}
