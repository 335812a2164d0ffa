package faults

import (
	"slices"

	"evenshelf/engine/audio"
)

// unused finds channels without sound beside others that have some. Films often have silent surrounds, so it
// is only worth a note; an effects channel is expected to be silent, and a dead left or right is known to pair
// unless both are.
type unused struct{}

func (unused) look(window) {}

func (unused) faults(e extent) []Fault {
	var names []string
	dead := func(c int) bool { return c >= 0 && float64(e.peak[c]) <= audio.DB(silence).Linear() }
	left, right := leftRight(e.Layout)
	both := dead(left) && dead(right)
	for c := range e.peak {
		if dead(c) && e.Layout.Position(c) != audio.LowFrequency && (both || c != left && c != right) {
			names = append(names, channelName(e.Layout, c))
		}
	}
	if loudest := float64(slices.Max(e.peak)); len(names) == 0 || loudest < audio.DB(nearSilence).Linear() {
		return nil
	}
	words := list(names) + " carries no sound"
	if len(names) > 1 {
		words = list(names) + " carry no sound"
	}
	return []Fault{{Code: "channel-unused", Severity: Note, Length: e.Seconds(e.frames), Words: words}}
}
