package store

import (
	"strings"
	"testing"
	"time"
)

// The original kept last is the one the file on the shelf was made from, whatever the clock said.
func TestOriginalKeptLastAlsoAfterTheClockWasSetBack(t *testing.T) {
	f := open(t)
	rec := f.found("a.wav")["a.wav"]
	_, jobs := f.run(Replace)
	keep := func(sum string) {
		t.Helper()
		o := Original{RecordingID: rec.ID, JobID: jobs[0], SHA256: strings.Repeat(sum, 64), Levelled: strings.Repeat("f", 64), Stored: "a." + sum + ".wav", Size: 5}
		if err := f.KeepOriginal(f.ctx, o); err != nil {
			t.Fatal(err)
		}
	}
	keep("b")
	f.exec(`UPDATE attic SET kept_at = ?`, time.Now().Add(24*time.Hour).UnixMilli()) // as if it had been tomorrow
	for _, sum := range []string{"a", "c", "b", "a"} {
		keep(sum)
		o, err := f.Original(f.ctx, rec.ID)
		if err != nil || o.Stored != "a."+sum+".wav" {
			t.Errorf("kept last: %s, the store says %s (%v)", sum, o.Stored, err)
		}
	}
}
