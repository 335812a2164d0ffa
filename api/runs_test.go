package api

import (
	"fmt"
	"os"
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

// A run may ask for another format and bit rate than its profile; what it asked for is what it is known with.
func TestRunWithWishesOfItsOwn(t *testing.T) {
	h := open(t, nil)
	ask := func(more string) reply {
		return h.ask("POST", at("/runs"), `{"shelf_id":1,"profile":"rotation",`+more+`}`)
	}
	var plain, own store.Run
	ask(`"delivery":"copy"`).into(t, 201, &plain)
	ask(`"delivery":"copy","format":"mp3","bit_rate_kbps":192`).into(t, 201, &own)
	if own.Format != profile.MP3 || own.BitRate != 192 || own.Profile != "rotation" || own.ProfileVersion == plain.ProfileVersion {
		t.Errorf("%+v", own)
	}
	if plain.Format != profile.OwnFormat || plain.BitRate != 0 || plain.Group != profile.Alone {
		t.Errorf("%+v", plain)
	}
	for more, want := range map[string]string{
		`"delivery":"copy","format":"tape"`:                          `format: "tape" is not one of`,
		`"delivery":"copy","bit_rate_kbps":191`:                      "bit_rate_kbps: 191 is not one of",
		`"delivery":"copy","group":"album"`:                          "ride.speed: slow does not go with the group album",
		`"delivery":"tags","format":"flac"`:                          "format: means nothing with delivery tags",
		`"delivery":"copy","format":"flac","bit_rate_kbps":192`:      "bit_rate_kbps: means nothing in flac",
		`"delivery":"measure","bit_rate_kbps":192`:                   "bit_rate_kbps: means nothing with delivery measure",
		`"delivery":"tags","group":"disc"`:                           `group: "disc" is not one of`,
		`"delivery":"copy","format":"mp3","bit_rate_kbps":191,"x":1`: "x: is not a field",
	} {
		kind := kindInvalid
		if want[0] == 'x' {
			kind = kindBadRequest
		}
		ask(more).wantProblem(t, kind, want)
	}
}

// Writing gain tags needs no target, only which recordings belong together; and a folder that can be written to.
func TestTagsRun(t *testing.T) {
	h := open(t, nil)
	for _, group := range []profile.Group{profile.Alone, profile.Folder, profile.Album} {
		var run store.Run
		h.ask("POST", at("/runs"), fmt.Sprintf(`{"shelf_id":1,"profile":"talk","delivery":"tags","group":%q}`, group)).into(t, 201, &run)
		if run.Delivery != store.Tags || run.Group != group || run.Profile != "talk" {
			t.Errorf("%+v", run)
		}
	}
	if err := os.RemoveAll(h.shelf.Root); err != nil {
		t.Fatal(err)
	}
	h.ask("POST", at("/runs"), `{"shelf_id":1,"profile":"talk","delivery":"tags"}`).wantProblem(t, kindInvalid, "delivery: tags has to write to the folder")
}
