package media

import (
	"bytes"
	"encoding/binary"
	"errors"
	"math"
	"os/exec"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
)

// The coefficients of ITU-R BS.775-3, Annex 4, Table 2, by hand, for one frame with another sample in each channel: a
// tenth in the first, two in the second, and so on. FFmpeg's pan filter, told the same coefficients, agrees.
func TestDownmix(t *testing.T) {
	for name, c := range map[string]struct {
		mask        audio.Speaker
		left, right float64
		pan         string
	}{
		// FL FR FC
		"3.0": {0x7, 0.1 + 0.70711*0.3, 0.2 + 0.70711*0.3, "c0=c0+0.707107*c2|c1=c1+0.707107*c2"},
		// FL FR FC BC
		"4.0": {0x107, 0.1 + 0.70711*0.3 + 0.5*0.4, 0.2 + 0.70711*0.3 + 0.5*0.4, "c0=c0+0.707107*c2+0.5*c3|c1=c1+0.707107*c2+0.5*c3"},
		// FL FR BL BR
		"quad": {0x33, 0.1 + 0.70711*0.3, 0.2 + 0.70711*0.4, "c0=c0+0.707107*c2|c1=c1+0.707107*c3"},
		// FL FR FC SL SR
		"5.0": {0x607, 0.1 + 0.70711*0.3 + 0.70711*0.4, 0.2 + 0.70711*0.3 + 0.70711*0.5, "c0=c0+0.707107*c2+0.707107*c3|c1=c1+0.707107*c2+0.707107*c4"},
		// FL FR FC LFE SL SR, and BL BR
		"5.1 side": {0x60F, 0.1 + 0.70711*0.3 + 0.70711*0.5, 0.2 + 0.70711*0.3 + 0.70711*0.6, "c0=c0+0.707107*c2+0.707107*c4|c1=c1+0.707107*c2+0.707107*c5"},
		"5.1 back": {0x3F, 0.1 + 0.70711*0.3 + 0.70711*0.5, 0.2 + 0.70711*0.3 + 0.70711*0.6, "c0=c0+0.707107*c2+0.707107*c4|c1=c1+0.707107*c2+0.707107*c5"},
		// FL FR FC LFE BC SL SR
		"6.1": {0x70F, 0.1 + 0.70711*0.3 + 0.5*0.5 + 0.70711*0.6, 0.2 + 0.70711*0.3 + 0.5*0.5 + 0.70711*0.7, "c0=c0+0.707107*c2+0.5*c4+0.707107*c5|c1=c1+0.707107*c2+0.5*c4+0.707107*c6"},
		// FL FR FC LFE BL BR SL SR: 1.6243 on the left is past full scale, and stays
		"7.1": {0x63F, 0.1 + 0.70711*(0.3+0.5+0.7), 0.2 + 0.70711*(0.3+0.6+0.8), "c0=c0+0.707107*c2+0.707107*c4+0.707107*c6|c1=c1+0.707107*c2+0.707107*c5+0.707107*c7"},
	} {
		n := countBits(c.mask)
		f := audio.Format{Rate: 48000, Layout: audio.Layout{Channels: n, Mask: c.mask}}
		const frames = 5000 // more than a block
		snd := audio.NewBlock(n, frames)
		for ch := range snd {
			for i := range snd[ch] {
				snd[ch][i] = float32(ch+1) / 10
			}
		}
		path := filepath.Join(t.TempDir(), "a.wav")
		write(t, withFFmpeg(t), path, Spec{Container: "wav", Codec: "pcm_f32le", BitDepth: 32, Float: true, Format: f}, snd)
		r, err := Downmix(open(t, withFFmpeg(t), path))
		if err != nil {
			t.Fatal(err)
		}
		got, info := drained(t, r)
		if !info.Mixed || info.Format.Layout != audio.Stereo || r.Format() != info.Format || got.Frames() != frames {
			t.Fatalf("%s: %+v, %d frames", name, info, got.Frames())
		}
		raw, err := exec.Command("ffmpeg", "-v", "error", "-i", path, "-af", "pan=stereo|"+c.pan, "-c:a", "pcm_f32le", "-f", "f32le", "-").Output()
		if err != nil {
			t.Fatal(err)
		}
		var second [frames][2]float32
		if err := binary.Read(bytes.NewReader(raw), binary.LittleEndian, &second); err != nil {
			t.Fatal(err)
		}
		for i := range frames {
			for side, want := range []float64{c.left, c.right} {
				x := float64(got[side][i])
				if math.Abs(x-want) > 1e-5 || math.Abs(x-float64(second[i][side])) > 1e-5 {
					t.Fatalf("%s: frame %d of channel %d is %.5f; by hand %.5f, by FFmpeg %.5f", name, i, side, x, want, second[i][side])
				}
			}
		}
	}
}

func countBits(mask audio.Speaker) (n int) {
	for ; mask != 0; mask &= mask - 1 {
		n++
	}
	return n
}

// Two channels need no mix, and of positions that the table does not have there is none.
func TestNoDownmix(t *testing.T) {
	dir := t.TempDir()
	for name, c := range map[string]struct {
		layout audio.Layout
		ok     bool
	}{
		"mono": {audio.Mono, true}, "stereo": {audio.Stereo, true},
		"unknown": {audio.Layout{Channels: 4}, false}, "overhead": {audio.Layout{Channels: 4, Mask: 0x5003}, false},
	} {
		path := filepath.Join(dir, name+".wav")
		spec := Spec{Container: "wav", Codec: "pcm_s16le", BitDepth: 16, Format: audio.Format{Rate: 48000, Layout: c.layout}}
		write(t, withFFmpeg(t), path, spec, audio.NewBlock(c.layout.Channels, 100))
		r := open(t, withFFmpeg(t), path)
		got, err := Downmix(r)
		if c.ok && (err != nil || got != r) || !c.ok && !errors.Is(err, ErrUnsupported) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
