package web

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// stateWords says a job's state to a person who does not know the queue.
func stateWords(s store.JobState) string {
	switch s {
	case "":
		return "not levelled yet"
	case store.Held:
		return "held for a listen"
	case store.Working:
		return "being worked on"
	}
	return string(s)
}

// deliveryWords says what a run writes and where that goes: "MP3, 192 kbit/s, one gain for a folder: levelled copies …".
func deliveryWords(r store.Run) string {
	var what []string
	if encoded := encodedWords(r); encoded != "" && r.Delivery.Levels() {
		what = append(what, encoded)
	}
	if group := groupWords(r); group != "" && r.Delivery != store.Measure {
		what = append(what, group)
	}
	if len(what) > 0 {
		return strings.Join(what, ", ") + ": " + goesTo(r.Delivery)
	}
	return goesTo(r.Delivery)
}

func goesTo(d store.Delivery) string {
	switch d {
	case store.Measure:
		return "only measuring, nothing is written"
	case store.Copy:
		return "levelled copies; originals not touched"
	case store.Replace:
		return "levelled files in place of the originals, which go to the attic first"
	case store.Tags:
		return "gain tags written into the files; the originals go to the attic first"
	}
	return string(d)
}

// encodedWords says in what a run's files are written where that is not the source's own: "MP3, 192 kbit/s".
func encodedWords(r store.Run) string {
	words := formatNames[r.Format]
	if r.BitRate != 0 {
		words += fmt.Sprintf(", %d kbit/s", r.BitRate)
	}
	return strings.TrimPrefix(words, ", ")
}

var formatNames = map[profile.Format]string{profile.WAV: "WAV", profile.FLAC: "FLAC", profile.MP3: "MP3", profile.M4A: "AAC in M4A",
	profile.Vorbis: "Vorbis in Ogg", profile.Opus: "Opus in Ogg"}

// groupWords says which recordings of a run share a gain; "" if none do.
func groupWords(r store.Run) string {
	switch r.Group {
	case profile.Folder:
		return "one gain for a folder"
	case profile.Album:
		return "one gain for an album"
	}
	return ""
}

// spread is the distance from the quietest to the loudest, LU; nil where either is missing.
func spread(quietest, loudest *float64) *float64 {
	if quietest == nil || loudest == nil {
		return nil
	}
	d := *loudest - *quietest
	return &d
}

// told is what happened to a recording, in a sentence.
func told(r store.Recording, run *store.Run, job *store.Job) string {
	switch r.State {
	case "":
		if r.Before == nil {
			return "Not measured yet: it waits for a first run."
		}
		if replaced(run) && job != nil && job.State == store.Done {
			return "The original is back in its place, bit for bit."
		}
		return "Measured, not levelled yet."
	case store.Waiting:
		return "Waiting for its turn in the queue."
	case store.Working:
		return "Being worked on right now."
	case store.Failed:
		if tagged(run) {
			return "No gain tags could be written: " + reasonOr(r.Reason, "the reason was not recorded") + ". The file on the shelf is as it was."
		}
		return "Could not be levelled: " + reasonOr(r.Reason, "the reason was not recorded") + ". The file on the shelf is as it was."
	case store.Cancelled:
		return "Cancelled before its turn came. The file on the shelf is as it was."
	}
	if run != nil && run.Delivery == store.Measure {
		return "Measured only; nothing was written." + because(r.Reason)
	}
	if tagged(run) {
		if job == nil {
			return "Its gain tags say what it measures; the sound is as it was."
		}
		return strings.TrimPrefix(because(reasonOr(job.Reason, "its gain tags say what it measures")), " ") + " The sound is as it was."
	}
	did := action(r, run, job)
	if r.State == store.Held {
		why := ": " + reasonOr(r.Reason, "something about the copy is in doubt")
		if job != nil && len(job.Doubts) > 0 { // the page lists them
			why = map[bool]string{true: ", for the reason below", false: ", for the reasons below"}[len(job.Doubts) == 1]
		}
		did = "Held for a listen" + why + ". " + did
		if replaced(run) {
			did += " The file on the shelf was not replaced."
		}
		return did
	}
	return did + because(r.Reason)
}

// action is the levelling itself, and first of all what came out: "Lifted by 11.3 LU to −18.0 LUFS; peaks held under
// −1.0 dBTP."
func action(r store.Recording, run *store.Run, job *store.Job) string {
	if job == nil || job.Plan == nil {
		if r.After != nil && r.After.Integrated != nil {
			return fmt.Sprintf("Now at %s LUFS.", audio.Number(*r.After.Integrated, 1))
		}
		return "Finished."
	}
	plan := job.Plan
	if plan.Untouched && replaced(run) {
		return "Already within the profile: kept byte for byte, nothing changed."
	}
	if plan.Untouched {
		return "Already within the profile: copied byte for byte, nothing changed."
	}
	s := ""
	c, known := changeOf(job)
	switch {
	case !known:
		s = fmt.Sprintf("Levelled with %s", gainSays(plan))
	case near(c.To, c.From):
		s = fmt.Sprintf("Left at its level, %s LUFS", audio.Number(c.To, 1))
	case c.To > c.From:
		s = fmt.Sprintf("Lifted by %s LU to %s LUFS", audio.Number(c.By(), 1), audio.Number(c.To, 1))
	default:
		s = fmt.Sprintf("Lowered by %s LU to %s LUFS", audio.Number(-c.By(), 1), audio.Number(c.To, 1))
	}
	if c.Speech {
		s = "Speech " + strings.ToLower(s[:1]) + s[1:]
	}
	if known && !plainGain(plan, c) {
		s += ", with " + gainSays(plan)
	}
	if plan.Compressor != nil {
		s += "; compressed"
	}
	if plan.Limit {
		s += fmt.Sprintf("; peaks held under %s dBTP", audio.Number(float64(plan.Ceiling), 1))
	}
	return s + "."
}

// replaced says whether a run puts its results in the place of originals.
func replaced(run *store.Run) bool { return run != nil && run.Delivery.Writes() }

// tagged says whether a run writes nothing but gain tags.
func tagged(run *store.Run) bool { return run != nil && run.Delivery == store.Tags }

func reasonOr(reason, otherwise string) string {
	if reason == "" {
		return otherwise
	}
	return strings.TrimSuffix(reason, ".")
}

func because(reason string) string {
	if reason == "" {
		return ""
	}
	first, n := utf8.DecodeRuneInString(reason)
	return " " + string(unicode.ToUpper(first)) + strings.TrimSuffix(reason[n:], ".") + "."
}
