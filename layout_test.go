package main

import (
	"encoding/json"
	"errors"
	"io"
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// mayImport says, for each room, which other rooms of the house it may import. Dependencies point one
// way; a room that is not listed may not exist.
var mayImport = map[string][]string{
	"engine/audio":       {},
	"engine/tags":        {"engine/audio"},
	"engine/tags/vorbis": {"engine/tags"},
	"engine/tags/flac":   {"engine/tags", "engine/tags/vorbis"},
	"engine/tags/ogg":    {"engine/tags", "engine/tags/vorbis"},
	"engine/tags/mp4":    {"engine/tags"},
	"engine/tags/id3":    {"engine/tags"},
	"engine/media":       {"engine/audio", "engine/tags"},
	"engine/meter":       {"engine/audio"},
	"engine/faults":      {"engine/audio"},
	"engine/speech":      {"engine/audio"},
	"engine/profile":     {"engine/audio"},
	"engine/dynamics":    {"engine/audio"},
	"engine/ride":        {},
	"engine/level":       {"engine/audio", "engine/media", "engine/tags", "engine/meter", "engine/speech", "engine/faults", "engine/profile", "engine/ride", "engine/dynamics"},
	"engine/demo":        {"engine/audio", "engine/media", "engine/meter"},
	"migrations":         {},
	"store":              {"engine", "migrations"},
	"worker":             {"engine", "store", "worker"},
	"worker/delivery":    {"engine"},
	"worker/discover":    {"engine", "store"},
	"api":                {"engine", "store"},
	"web":                {"engine", "store"},
	"web/webtest":        {},
	"command":            {"engine", "store", "worker", "api", "web"},
	"":                   {"command"},
}

// notFor names outside packages that only certain rooms may import.
var notFor = []struct {
	outside string
	rooms   []string // room prefixes that may
}{
	{"database/sql", []string{"store"}},
	{"github.com/mattn/go-sqlite3", []string{"store"}},
	{"github.com/riverqueue/river", []string{"worker", "store"}},
	{"net/http", []string{"api", "web", "command"}},
	{"github.com/gin-gonic/gin", []string{"api", "web", "command"}},
}

func TestDependenciesPointOneWay(t *testing.T) {
	out, err := exec.Command("go", "list", "-json=ImportPath,Imports", "./...").Output()
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for dec := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p struct {
			ImportPath string
			Imports    []string
		}
		if err := dec.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
		room := strings.TrimPrefix(strings.TrimPrefix(p.ImportPath, "evenshelf"), "/")
		allowed, known := mayImport[room]
		if !known {
			t.Errorf("room %q is not in the plan of the house", room)
			continue
		}
		seen[room] = true
		for _, imp := range p.Imports {
			if other, ours := strings.CutPrefix(imp, "evenshelf/"); ours && !within(other, allowed) {
				t.Errorf("%s imports %s", room, other)
			}
			for _, n := range notFor {
				if within(imp, []string{n.outside}) && !within(room, n.rooms) {
					t.Errorf("%s imports %s", room, imp)
				}
			}
		}
	}
	for room := range mayImport {
		if !seen[room] {
			t.Errorf("room %q is in the plan, but not in the house", room)
		}
	}
}

// within reports whether a path is one of the rooms or below one.
func within(path string, rooms []string) bool {
	return slices.ContainsFunc(rooms, func(room string) bool {
		return path == room || strings.HasPrefix(path, room+"/")
	})
}
