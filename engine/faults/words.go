package faults

import (
	"fmt"
	"strings"

	"evenshelf/engine/audio"
)

// times writes a count as people say it.
func times(n int64) string {
	switch n {
	case 1:
		return "once"
	case 2:
		return "twice"
	}
	return audio.Count(n) + " times"
}

// list joins names: a, b and c.
func list(names []string) string {
	last := len(names) - 1
	if last < 1 {
		return strings.Join(names, "")
	}
	return strings.Join(names[:last], ", ") + " and " + names[last]
}

// positions are the names of channels by the loudspeaker they feed, without "the" and "channel".
var positions = map[audio.Speaker]string{
	audio.FrontLeft: "left", audio.FrontRight: "right", audio.FrontCentre: "centre", audio.LowFrequency: "low-frequency",
	audio.BackLeft: "left back", audio.BackRight: "right back", audio.BackCentre: "back centre",
	audio.FrontLeftOfCentre: "left of centre", audio.FrontRightOfCentre: "right of centre",
	audio.SideLeft: "left side", audio.SideRight: "right side",
	audio.TopCentre: "top centre", audio.TopFrontLeft: "top left front", audio.TopFrontCentre: "top centre front",
	audio.TopFrontRight: "top right front", audio.TopBackLeft: "top left back", audio.TopBackCentre: "top centre back",
	audio.TopBackRight: "top right back",
}

// channelName says which channel is meant. Where there is one pair of surround channels, it says surround,
// whether the mask puts them at the side or at the back.
func channelName(l audio.Layout, c int) string {
	const left, right = audio.BackLeft | audio.SideLeft, audio.BackRight | audio.SideRight
	p := l.Position(c)
	name, known := positions[p]
	switch {
	case l.Channels == 1:
		return "the sound"
	case !known:
		return fmt.Sprintf("channel %d", c+1)
	case p&left != 0 && l.Mask&left == p:
		name = "left surround"
	case p&right != 0 && l.Mask&right == p:
		name = "right surround"
	}
	return "the " + name + " channel"
}
