package media

import (
	"encoding/json"
	"testing"
)

// entries returns who encoded a FLAC or Ogg file and its comments in order, as python3-mutagen reads them.
func entries(t testing.TB, path string) (vendor string, list []string) {
	t.Helper()
	var said struct {
		Vendor  string
		Entries [][2]string
	}
	out := run(t, "/usr/bin/python3", "-c", `
import sys, json, mutagen
f = mutagen.File(sys.argv[1])
print(json.dumps({"vendor": f.tags.vendor, "entries": list(f.tags)}))
`, path)
	if err := json.Unmarshal(out, &said); err != nil {
		t.Fatal(err)
	}
	for _, e := range said.Entries {
		list = append(list, e[0]+"="+e[1])
	}
	return said.Vendor, list
}
