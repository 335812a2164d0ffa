package media

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"os"
	"strings"

	"evenshelf/engine/audio"
)

// A bext chunk (EBU Tech 3285, version 2) says where a broadcast recording comes from, how loud it is, and, line by
// line, what has been done to it (EBU R 98). It has 602 bytes and the lines; places below are in bytes from its start.
const (
	bextVersion = 346
	bextUMID    = 348 // from version 1 on
	bextFigures = 412 // five, from version 2 on
	bextUnused  = 422 // reserved
	bextHistory = 602

	noFigure = 0x7FFF
)

// Loudness is what a bext chunk says of a recording's loudness. What is not finite is undefined.
type Loudness struct {
	Integrated             audio.LUFS
	Range                  audio.LU
	TruePeak               audio.DBTP
	MaxMomentary, MaxShort audio.LUFS
}

// bext are the figures in their order, 100 × each, rounded, 16 bits (EBU Tech 3285, 2.4).
func (l Loudness) bext() []byte {
	var b []byte
	for _, v := range []float64{
		float64(l.Integrated), float64(l.Range), float64(l.TruePeak), float64(l.MaxMomentary), float64(l.MaxShort),
	} {
		n := math.Round(100 * v)
		if !(n >= math.MinInt16 && n < noFigure) {
			n = noFigure
		}
		b = binary.LittleEndian.AppendUint16(b, uint16(int16(n)))
	}
	return b
}

// mendBext brings a bext chunk to version 2 without figures, which are not known before the copy has been measured
// (see Stamp), and adds a line of history. One shorter than the standard's has no room for that; if it states a
// loudness, that goes.
func mendBext(b []byte, _ *tagSource, spec Spec) []byte {
	none := audio.Undefined
	undefined := Loudness{audio.LUFS(none), audio.LU(none), audio.DBTP(none), audio.LUFS(none), audio.LUFS(none)}.bext()
	if len(b) < bextHistory {
		if len(b) >= bextUnused && le16(b[bextVersion:]) >= 2 {
			copy(b[bextFigures:], undefined)
		}
		return b
	}
	version := le16(b[bextVersion:])
	if version < 1 {
		clear(b[bextUMID:bextFigures]) // nothing was there
	}
	binary.LittleEndian.PutUint16(b[bextVersion:], max(version, 2))
	copy(b[bextFigures:], undefined)
	return append(b[:bextHistory:bextHistory], addHistory(b[bextHistory:], spec)...)
}

// addHistory returns a coding history with a line more. Zeros at the end are room: they are used up before the history
// grows, and one stays to end it.
func addHistory(history []byte, spec Spec) []byte {
	if spec.History == "" {
		return history
	}
	lines := bytes.TrimRight(history, "\x00")
	text := string(lines)
	if text != "" && !strings.HasSuffix(text, "\n") {
		text = strings.TrimSuffix(text, "\r") + "\r\n"
	}
	text += historyLine(spec)
	if room := len(history); len(lines) < room {
		text += strings.Repeat("\x00", max(1, room-len(text)))
	}
	return []byte(text)
}

// historyLine is a line of EBU R 98: coding, sampling rate, word length, mode of one or two channels, free text. Its
// fields are divided by commas, so the text has none, and it is ASCII.
func historyLine(spec Spec) string {
	mode := map[audio.Layout]string{audio.Mono: ",M=mono", audio.Stereo: ",M=stereo"}[spec.Format.Layout]
	text := strings.Map(func(r rune) rune {
		switch {
		case r == ',':
			return ';'
		case r < ' ' || r > '~':
			return '?'
		}
		return r
	}, spec.History)
	return fmt.Sprintf("A=PCM,F=%d,W=%d%s,T=%s\r\n", spec.Format.Rate, spec.BitDepth, mode, text)
}

// Stamp writes a recording's loudness into its bext chunk, in place, and brings the file to the disk. Files without
// one, and files of formats that have none, are left as they are. Errors name the file.
func Stamp(path string, l Loudness) error {
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		return about(path, err)
	}
	if err := errors.Join(stamp(f, l), f.Close()); err != nil {
		return about(path, err)
	}
	return nil
}

func stamp(f *os.File, l Loudness) error {
	info, err := f.Stat()
	if err != nil {
		return err
	}
	k, err := sniff(f)
	if err != nil || k.container != "wav" {
		return err
	}
	h, err := parseWAV(f, info.Size())
	if err != nil {
		return err
	}
	stamped := false
	for _, c := range append(h.before, h.after...) {
		if c.id != "bext" || c.len < bextHistory {
			continue
		}
		stamped = true
		version, err := readAt(f, c.start+bextVersion, 2)
		if err != nil {
			return err
		}
		binary.LittleEndian.PutUint16(version, max(le16(version), 2))
		_, err1 := f.WriteAt(version, c.start+bextVersion)
		_, err2 := f.WriteAt(l.bext(), c.start+bextFigures)
		if err := errors.Join(err1, err2); err != nil {
			return err
		}
	}
	if !stamped {
		return nil
	}
	return f.Sync()
}
