package faults

// Severity says what a fault means for levelling.
type Severity string

// The severities, mildest first.
const (
	Note    Severity = "note"    // worth knowing, changes nothing
	Doubt   Severity = "doubt"   // a levelled copy is held for a person to listen to
	Serious Severity = "serious" // the recording is damaged: a levelled copy is held
)

// Fault is one thing wrong with a recording, in words a person can act on.
type Fault struct {
	Code     string   `json:"code"` // stable, e.g. "clipped", "truncated"
	Severity Severity `json:"severity"`
	At       float64  `json:"at_s"`     // where it begins, seconds from the start
	Length   float64  `json:"length_s"` // how long it lasts in all, seconds
	Words    string   `json:"words"`    // one sentence, e.g. "clipped 214 times, first at 0:03.2"
}

// Throughout reports whether the fault concerns the whole of a recording of so many seconds, not a place in it.
func (f Fault) Throughout(duration float64) bool { return f.Length > 0 && f.Length >= 0.99*duration }
