package demo

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"strings"

	"evenshelf/engine/audio"
)

// What goes wrong with recordings: each of the first functions takes a whole file and returns it spoilt,
// the last two render sound that no levelling should pass on unheard.

// emptied is what a copy leaves that never started.
func emptied([]byte) []byte { return nil }

// cutShort is what a copy leaves that never finished: the header promises more.
func cutShort(file []byte) []byte { return file[:len(file)*2/5] }

// scratched overwrites the middle sixth of a file, as a bad disk sector does.
func scratched(file []byte) []byte {
	r := dice("bad sector")
	from, to := len(file)/2, len(file)/2+len(file)/6
	for i := from; i < to; i++ {
		file[i] = byte(r.Uint32())
	}
	return file
}

// patched returns a spoiler that writes a little-endian number into the fmt chunk of a WAV file, offset
// bytes from the chunk's name.
func patched[N uint16 | uint32](offset int, value N) func([]byte) []byte {
	return func(file []byte) []byte {
		at := bytes.Index(file, []byte("fmt ")) + offset
		if _, err := binary.Encode(file[at:], binary.LittleEndian, value); err != nil {
			panic(err) // a WAV file of ours is longer than its fmt chunk
		}
		return file
	}
}

// replaced returns a spoiler that puts a text where sound should be.
func replaced(text string) func([]byte) []byte {
	return func([]byte) []byte { return []byte(text) }
}

// playlist is a list of files under the name of one: somebody saved the wrong thing.
func playlist() string {
	var b strings.Builder
	b.WriteString("#EXTM3U\n")
	for i, name := range []string{"copper kettle parade", "ninety paper boats", "the long way to the pier"} {
		fmt.Fprintf(&b, "#EXTINF:%d,%s\n../music/%s.wav\n", 30+i, name, strings.ReplaceAll(name, " ", "-"))
	}
	return b.String()
}

const letter = `Dear all at the station,

the recording of the harvest supper would not attach, it is too big. I have put it on a stick and left it
under the flowerpot by the studio door. Could somebody bring the flowerpot in, too?

Kind regards, the choir's second treasurer
`

// overdriven is a talk recorded with the level all the way up: the tops of most syllables are cut off flat.
func overdriven(name string, rate int, seconds float64) audio.Block {
	t := boris.speak(dice(name), rate, seconds)
	for i, x := range t {
		t[i] = math.Max(-1, math.Min(1, 9*x)) * 0.9999
	}
	return toBlock(t)
}

// mute is digital silence.
func mute(channels, rate int, seconds float64) audio.Block {
	return audio.NewBlock(channels, int(float64(rate)*seconds))
}
