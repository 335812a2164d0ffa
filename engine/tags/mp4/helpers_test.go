package mp4

import (
	"bytes"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"evenshelf/engine/tags"
)

// run runs an outside program, without which nothing here could be checked by a second opinion.
func run(t testing.TB, name string, args ...string) string {
	t.Helper()
	cmd := exec.Command(name, args...)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s\nthis test needs: apt install ffmpeg python3-mutagen", name, args, err, &stderr)
	}
	return string(out)
}

// made has FFmpeg make a file of three seconds of sound, with pictures if args ask for them: input 1 is a test card.
func made(t testing.TB, name string, args ...string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	run(t, "ffmpeg", append(append([]string{"-v", "error", "-f", "lavfi", "-i", "anoisesrc=d=3:r=44100:seed=5", "-f", "lavfi", "-i", "testsrc=d=3:s=96x64:r=10",
		"-metadata", "title=T"}, args...), path)...)
	return path
}

func load(t testing.TB, path string) []byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func save(t testing.TB, path string, b []byte) {
	t.Helper()
	if err := os.WriteFile(path, b, 0o644); err != nil {
		t.Fatal(err)
	}
}

func retag(b []byte, g tags.Gains) ([]byte, error) {
	var out bytes.Buffer
	err := Retag(&out, io.NewSectionReader(bytes.NewReader(b), 0, int64(len(b))), g)
	return out.Bytes(), err
}

// memory is a file in memory.
type memory struct{ b []byte }

func (m *memory) ReadAt(p []byte, at int64) (int, error) { return bytes.NewReader(m.b).ReadAt(p, at) }

func (m *memory) WriteAt(p []byte, at int64) (int, error) {
	if missing := int(at) + len(p) - len(m.b); missing > 0 {
		m.b = append(m.b, make([]byte, missing)...)
	}
	return copy(m.b[at:], p), nil
}

func (m *memory) Truncate(size int64) error {
	if missing := int(size) - len(m.b); missing > 0 {
		m.b = append(m.b, make([]byte, missing)...)
	}
	m.b = m.b[:size]
	return nil
}

// written returns a box as bytes.
func written(t testing.TB, list ...*box) []byte {
	t.Helper()
	var b bytes.Buffer
	for _, x := range list {
		if err := x.writeTo(&b); err != nil {
			t.Fatal(err)
		}
	}
	return b.Bytes()
}
