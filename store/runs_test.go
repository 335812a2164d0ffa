package store

import (
	"encoding/json"
	"testing"

	"evenshelf/engine/audio"
)

// A profile whose document a later version cannot read hides no run: what is not known of it is said to be so.
func TestUnreadableProfileHidesNoRun(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	run, _ := f.run(Copy)
	for _, document := range []string{`{"ride": "slow"}`, `[]`, `{"tolerance_lu": "near"}`} {
		if _, err := f.writer.ExecContext(f.ctx, `UPDATE profiles SET document = ?`, document); err != nil {
			t.Fatal(err)
		}
		list, err := f.Runs(f.ctx, 10, 0)
		if err != nil || len(list) != 1 || list[0].ID != run.ID || list[0].Target != -18 || list[0].Profile != "rotation" {
			t.Fatalf("%s: %+v %v", document, list, err)
		}
		if audio.Defined(list[0].Tolerance) || audio.Defined(list[0].Ceiling) {
			t.Errorf("%s: %+v", document, list[0])
		}
		if b, err := json.Marshal(list[0]); err != nil || !json.Valid(b) {
			t.Errorf("%s: %v", document, err)
		}
		if shelves, err := f.Shelves(f.ctx); err != nil || shelves[0].LastRun == nil || shelves[0].LastRun.ID != run.ID {
			t.Errorf("%s: %+v %v", document, shelves, err)
		}
	}
}
