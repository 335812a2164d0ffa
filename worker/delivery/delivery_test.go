package delivery

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/level"
)

func TestDeliver(t *testing.T) {
	for _, c := range []struct {
		why, rel string
		l        leveller
		want     string
	}{
		{"same format", "m/a.wav", leveller{}, "m/a.wav"},
		{"same format, capitals", "m/a.WAV", leveller{extension: ".wav"}, "m/a.WAV"},
		{"another format", "a.ogg", leveller{extension: ".flac"}, "a.ogg.flac"},
		{"no extension", "m/a", leveller{extension: ".wav"}, "m/a.wav"},
		{"held", "m/a.wav", leveller{state: level.Held}, "_held/m/a.wav"},
		{"held in another format", "m/a.ogg", leveller{state: level.Held, extension: ".flac"}, "_held/m/a.ogg.flac"},
		{"longest name", strings.Repeat("n", 251) + ".wav", leveller{}, strings.Repeat("n", 251) + ".wav"},
		{"not UTF-8", "latin-\xe9/\xe9.wav", leveller{}, "latin-\xe9/\xe9.wav"},
	} {
		t.Run(c.why, func(t *testing.T) {
			b := newBench(t)
			b.source(c.rel)
			o, output, err := b.deliver(&c.l, c.rel, Options{})
			if err != nil || output != c.want || o.After == nil {
				t.Fatalf("%q %v %+v, want %q", output, err, o.Verdict, c.want)
			}
			b.want(c.want + "=levelled")
			info, err := os.Stat(filepath.Join(b.out, output))
			if err != nil {
				t.Fatal(err)
			}
			if info.Mode().Perm() != 0o644 || !info.ModTime().Equal(sourceTime) {
				t.Errorf("mode %o, time %s", info.Mode().Perm(), info.ModTime())
			}
			if dir := filepath.Dir(filepath.Join(b.out, c.rel)); filepath.Dir(c.l.scratch) != dir || !scratch.MatchString(filepath.Base(c.l.scratch)) {
				t.Errorf("scratch file %s is not a hidden one in %s", c.l.scratch, dir)
			}
		})
	}
}

func TestNothingIsLeftWhenItFails(t *testing.T) {
	sorry := errors.New("sorry")
	for why, l := range map[string]leveller{
		"error":         {err: sorry},
		"error, held":   {err: sorry, state: level.Held},
		"no file made":  {nothing: true, state: level.Failed},
		"failed":        {state: level.Failed},
		"panic":         {panics: true},
		"claims a file": {lies: true},
		"source changes": {during: func() {
			if err := os.WriteFile("a.wav", []byte("longer than before"), 0o644); err != nil {
				panic(err)
			}
		}},
	} {
		t.Run(why, func(t *testing.T) {
			b := newBench(t)
			b.source("a.wav")
			t.Chdir(b.src)
			b.write(filepath.Join(b.out, "a.wav"), "earlier")
			func() {
				defer func() {
					if p := recover(); (p != nil) != l.panics {
						t.Errorf("panic: %v", p)
					}
				}()
				o, output, err := b.deliver(&l, "a.wav", ours)
				if output != "" || err == nil && o.Verdict.State != level.Failed {
					t.Errorf("%q %v %+v", output, err, o.Verdict)
				}
			}()
			b.want("a.wav=earlier")
		})
	}
}

func TestRepeatedJobReplacesItsLeftovers(t *testing.T) {
	b := newBench(t)
	b.source("m/a.wav")
	victim := b.write(filepath.Join(b.src, "other.wav"), "someone's recording")
	left := filepath.Join(b.out, "m", scratchName("a.wav", "job-7"))
	b.write(left, "half")
	for _, leave := range []func(){
		func() {},
		func() { // a scratch name that is a hard link must be unlinked, not written through
			if err := os.Link(victim, left); err != nil {
				t.Fatal(err)
			}
		},
		func() {
			if err := os.Symlink(victim, left); err != nil {
				t.Fatal(err)
			}
		},
	} {
		leave()
		if _, output, err := b.deliver(&leveller{}, "m/a.wav", ours); output != "m/a.wav" || err != nil {
			t.Errorf("%q %v", output, err)
		}
		b.want("m/a.wav=levelled")
	}
	if got := files(t, b.src); !slices.Equal(got, []string{"m/a.wav=source", "other.wav=someone's recording"}) {
		t.Errorf("sources: %q", got)
	}
}

func TestOverwrite(t *testing.T) {
	b := newBench(t)
	b.source("a.wav")
	if _, output, err := b.deliver(&leveller{text: " once"}, "a.wav", Options{}); output != "a.wav" || err != nil {
		t.Fatal(output, err)
	}
	o, output, err := b.deliver(&leveller{text: " twice"}, "a.wav", Options{})
	if output != "" || err != nil || o.Verdict.State != level.Failed || o.Verdict.Reason != "a.wav is already there" {
		t.Errorf("%q %v %+v", output, err, o.Verdict)
	}
	b.want("a.wav=levelled once")
	// The name is taken while the engine is at work.
	b.source("b.wav")
	o, output, err = b.deliver(&leveller{during: func() { b.write(filepath.Join(b.out, "b.wav"), "quicker") }}, "b.wav", Options{})
	if output != "" || err != nil || o.Verdict.Reason != "b.wav is already there" {
		t.Errorf("%q %v %+v", output, err, o.Verdict)
	}
	if _, output, err := b.deliver(&leveller{text: " thrice"}, "a.wav", ours); output != "a.wav" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	b.want("a.wav=levelled thrice", "b.wav=quicker")
}

// A file that happens to have the recording's name is in nobody's way if the copy will have another, and a
// copy in another format may lie beside its recording.
func TestAnotherFormatBesideTheSource(t *testing.T) {
	b := newBench(t)
	b.source("a.ogg")
	b.out = b.src
	if _, output, err := b.deliver(&leveller{extension: ".flac"}, "a.ogg", Options{}); output != "a.ogg.flac" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	b.want("a.ogg=source", "a.ogg.flac=levelled")
}

func TestStaleCopiesGo(t *testing.T) {
	b := newBench(t)
	b.source("a.wav")
	b.write(filepath.Join(b.out, "_held/b.wav"), "another's")
	step := func(state level.State, opt Options, want ...string) {
		t.Helper()
		l := leveller{state: state, nothing: state == level.Failed}
		if _, _, err := b.deliver(&l, "a.wav", opt); err != nil {
			t.Fatal(err)
		}
		b.want(want...)
	}
	step(level.Held, ours, "_held/a.wav=levelled", "_held/b.wav=another's")
	step(level.Done, Options{}, "_held/a.wav=levelled", "_held/b.wav=another's", "a.wav=levelled") // not ours: nothing is removed
	step(level.Done, ours, "_held/b.wav=another's", "a.wav=levelled")
	// What was done before stays in place: a playout system may be using it.
	step(level.Held, ours, "_held/a.wav=levelled", "_held/b.wav=another's", "a.wav=levelled")
	step(level.Failed, ours, "_held/a.wav=levelled", "_held/b.wav=another's", "a.wav=levelled")
}

func TestSourceIsNeverWritten(t *testing.T) {
	for why, prepare := range map[string]func(b *bench){
		"output folder is the source folder": func(b *bench) { b.out = b.src },
		"output folder leads to it":          func(b *bench) { must(b.t, os.Symlink(b.src, b.out)) },
		"target is a hard link to it": func(b *bench) {
			must(b.t, os.MkdirAll(b.out, 0o755))
			must(b.t, os.Link(filepath.Join(b.src, "a.wav"), filepath.Join(b.out, "a.wav")))
		},
		"held target is a hard link to it": func(b *bench) {
			must(b.t, os.MkdirAll(filepath.Join(b.out, "_held"), 0o755))
			must(b.t, os.Link(filepath.Join(b.src, "a.wav"), filepath.Join(b.out, "_held/a.wav")))
		},
		"scratch is a hard link to it": func(b *bench) {
			must(b.t, os.MkdirAll(b.out, 0o755))
			must(b.t, os.Link(filepath.Join(b.src, "a.wav"), filepath.Join(b.out, scratchName("a.wav", "job-7"))))
		},
	} {
		for _, opt := range []Options{{}, ours} {
			t.Run(why, func(t *testing.T) {
				b := newBench(t)
				b.t = t
				b.source("a.wav")
				prepare(b)
				l := leveller{}
				if strings.HasPrefix(why, "held") {
					l.state = level.Held
				}
				o, output, err := b.deliver(&l, "a.wav", opt)
				if err != nil || output != "" || o.Verdict.State != level.Failed || !strings.Contains(o.Verdict.Reason, "would overwrite the recording itself") &&
					o.Verdict.Reason != "a.wav is already there" {
					t.Errorf("%q %v %+v", output, err, o.Verdict)
				}
				text, err := os.ReadFile(filepath.Join(b.src, "a.wav"))
				if err != nil || string(text) != "source" {
					t.Errorf("the source is now %q, %v", text, err)
				}
			})
		}
	}
}

// A held result never touches the recording itself.
func TestStaleCopyIsNeverTheSource(t *testing.T) {
	b := newBench(t)
	b.source("a.wav")
	b.out = b.src
	if _, output, err := b.deliver(&leveller{state: level.Held}, "a.wav", ours); output != "_held/a.wav" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	b.want("_held/a.wav=levelled", "a.wav=source")
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func TestLinksOutOfTheOutputFolder(t *testing.T) {
	b := newBench(t)
	elsewhere := filepath.Join(filepath.Dir(b.out), "elsewhere")
	b.write(filepath.Join(elsewhere, "precious.wav"), "precious")
	must(t, os.MkdirAll(filepath.Join(b.out, "x"), 0o755))
	must(t, os.Symlink(elsewhere, filepath.Join(b.out, "abs")))
	must(t, os.Symlink("../../elsewhere", filepath.Join(b.out, "x/rel")))
	must(t, os.Symlink(elsewhere, filepath.Join(b.out, "_held")))
	must(t, os.Symlink(filepath.Join(elsewhere, "precious.wav"), filepath.Join(b.out, "precious.wav")))
	for rel, state := range map[string]level.State{"abs/a.wav": "", "abs/new/a.wav": "", "x/rel/a.wav": "", "x/rel/new/er/a.wav": "", "a.wav": level.Held} {
		b.source(rel)
		o, output, err := b.deliver(&leveller{state: state}, rel, ours)
		if err != nil || output != "" || o.Verdict.State != level.Failed || !strings.Contains(o.Verdict.Reason, "leads out of the copies folder") {
			t.Errorf("%s: %q %v %+v", rel, output, err, o.Verdict)
		}
	}
	// A link at the target's own name is replaced, not followed.
	b.source("precious.wav")
	if _, output, err := b.deliver(&leveller{}, "precious.wav", ours); output != "precious.wav" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	if got := files(t, elsewhere); !slices.Equal(got, []string{"precious.wav=precious"}) {
		t.Errorf("elsewhere: %q", got)
	}
}

func TestDeliverRefuses(t *testing.T) {
	b := newBench(t)
	b.source("a.ogg")
	b.source("a.ogg.flac")
	b.source("dir.wav")
	b.source("f/x.wav")
	b.source("_held/x.wav")
	must(t, os.MkdirAll(filepath.Join(b.out, "dir.wav"), 0o755))
	for _, c := range []struct{ rel, extension, want string }{
		{"a.ogg", ".flac", "its copy would take the name of another recording's, a.ogg.flac"},
		{"dir.wav", "", "there is a folder where its copy should go, dir.wav"},
		{"_held/x.wav", "", "the folder name _held is taken for copies that are held"},
		{"../src/f/x.wav", "", `"../src/f/x.wav" is not a path inside a folder`},
		{"f/../f/x.wav", "", `"f/../f/x.wav" is not a path inside a folder`},
		{"", "", `"" is not a path inside a folder`},
	} {
		o, output, err := b.deliver(&leveller{extension: c.extension}, c.rel, ours)
		if err != nil || output != "" || o.Verdict.State != level.Failed || o.Verdict.Reason != c.want || o.After != nil {
			t.Errorf("%s: %q %v %+v, want %q", c.rel, output, err, o.Verdict, c.want)
		}
	}
	b.want()
	// What may heal is an error.
	if _, _, err := b.deliver(&leveller{}, "gone.wav", ours); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("no source: %v", err)
	}
	b.out = b.write(filepath.Join(filepath.Dir(b.out), "file"), "a file")
	if _, _, err := b.deliver(&leveller{}, "f/x.wav", ours); err == nil {
		t.Error("output folder is a file: no error")
	}
	for _, key := range []string{"", "../x", "A", "a.b", strings.Repeat("k", 41)} {
		if _, _, err := Deliver(t.Context(), &leveller{}, filepath.Join(b.src, "f/x.wav"), b.src, "f/x.wav", level.Task{}, key, ours); err == nil {
			t.Errorf("key %q: no error", key)
		}
	}
	if err := enoughSpace(b.src, 1<<62); err == nil || !strings.Contains(err.Error(), "MB free") {
		t.Errorf("four exabytes: %v", err)
	}
}

func TestSweep(t *testing.T) {
	b := newBench(t)
	long := scratchName(strings.Repeat("n", 255), "job-1")
	if len(long) > 255 {
		t.Errorf("scratch name of %d bytes", len(long))
	}
	for _, name := range []string{scratchName("a.wav", "job-1"), "deep/er/" + scratchName("b.ogg", "job-22"), long} {
		b.write(filepath.Join(b.out, name), "ours")
	}
	keep := []string{".a.wav.part", ".hidden", "a.wav", "deep/a.wav.evenshelf-job-1.part", "deep/.x.wav.Ab3dEf", ".evenshelf-job-1.part"}
	for _, name := range keep {
		b.write(filepath.Join(b.out, name), "theirs")
	}
	outside := b.write(filepath.Join(b.src, scratchName("c.wav", "job-1")), "not below")
	must(t, os.Symlink(b.src, filepath.Join(b.out, "link")))
	must(t, os.Symlink(outside, filepath.Join(b.out, scratchName("d.wav", "job-1"))))
	n, err := Sweep(b.out)
	if n != 3 || err != nil {
		t.Errorf("%d %v", n, err)
	}
	must(t, os.Remove(filepath.Join(b.out, "link")))
	must(t, os.Remove(filepath.Join(b.out, scratchName("d.wav", "job-1"))))
	var want []string
	for _, name := range keep {
		want = append(want, name+"=theirs")
	}
	slices.Sort(want)
	got := files(t, b.out)
	slices.Sort(got)
	if !slices.Equal(got, want) {
		t.Errorf("left %q, want %q", got, want)
	}
	if _, err := os.Stat(outside); err != nil {
		t.Error(err)
	}
	if n, err := Sweep(filepath.Join(b.out, "gone")); n != 0 || err != nil {
		t.Errorf("no folder: %d %v", n, err)
	}
}
