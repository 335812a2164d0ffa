package web

import (
	"strconv"

	"evenshelf/store"
)

// The spark is a recording's two spines laid on their side, small enough for a table row: before above,
// hollow; after below, filled. All rows share one scale, so a column of them shows raggedness at a glance.
const (
	sparkFrom = -50.0 // LUFS at the left edge
	sparkTo   = 0.0
	sparkWide = 132.0 // in the SVG's own units
)

type spark struct {
	Before, After *sparkBar
	State         store.JobState
}

// sparkBar is where a bar begins, how long it is, and where its notch sits. SVG takes them as attributes,
// which a content security policy without inline styles allows.
type sparkBar struct{ X, Width, Notch string }

func newSpark(before, after *store.Figures, state store.JobState) spark {
	return spark{newSparkBar(before), newSparkBar(after), state}
}

func newSparkBar(f *store.Figures) *sparkBar {
	if f == nil || f.ShortTerm10 == nil || f.ShortTerm95 == nil || f.Integrated == nil {
		return nil
	}
	from, to := sparkX(*f.ShortTerm10), sparkX(*f.ShortTerm95)
	return &sparkBar{
		X:     strconv.FormatFloat(from, 'f', 1, 64),
		Width: strconv.FormatFloat(max(to-from, 2), 'f', 1, 64),
		Notch: strconv.FormatFloat(sparkX(*f.Integrated), 'f', 1, 64),
	}
}

func sparkX(lufs float64) float64 {
	x := (lufs - sparkFrom) / (sparkTo - sparkFrom) * sparkWide
	return min(max(x, 1), sparkWide-1)
}
