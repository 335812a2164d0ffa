package store

import (
	"bytes"
	"compress/zlib"
	"context"
	"database/sql"
	"encoding/binary"
	"fmt"
	"io"
	"math"

	"evenshelf/engine/level"
	"evenshelf/engine/speech"
)

// The levels of a timeline are stored as Momentary, ShortTerm and Peak one after another, each a little-endian
// int16 a value: the difference, in hundredths of dB and wrapping round, from the value before it. Small
// differences squeeze well (zlib), and an hour of speech takes some 90 kB instead of 430.
//
// The error of a value is at most 0.005 dB and does not add up, because the differences are taken between
// rounded values. −Inf and NaN are kept apart as two values below the lowest level, −327.66 dB; levels
// outside ±327.66 dB are cut to it.
//
// Level is not kept: only planning a ride asks for it, on an analysis that is fresh. A timeline read back has none.
const (
	storedSilence   = math.MinInt16     // −Inf
	storedUndefined = math.MinInt16 + 1 // NaN
	storedLowest    = math.MinInt16 + 2
	storedHighest   = math.MaxInt16
)

func packLevel(v float32) int16 {
	switch f := float64(v); {
	case math.IsNaN(f):
		return storedUndefined
	case math.IsInf(f, -1):
		return storedSilence
	default:
		return int16(min(max(math.Round(f*100), storedLowest), storedHighest))
	}
}

func unpackLevel(n int16) float32 {
	switch n {
	case storedUndefined:
		return float32(math.NaN())
	case storedSilence:
		return float32(math.Inf(-1))
	}
	return float32(float64(n) / 100)
}

// packLevels packs the three curves of levels.
func packLevels(t level.Timeline) ([]byte, error) {
	if len(t.ShortTerm) != len(t.Momentary) || len(t.Peak) != len(t.Momentary) {
		return nil, fmt.Errorf("timeline: curves of %d, %d and %d values", len(t.Momentary), len(t.ShortTerm), len(t.Peak))
	}
	raw := make([]byte, 0, 6*len(t.Momentary))
	for _, curve := range [][]float32{t.Momentary, t.ShortTerm, t.Peak} {
		last := int16(0)
		for _, v := range curve {
			n := packLevel(v)
			raw = binary.LittleEndian.AppendUint16(raw, uint16(n-last))
			last = n
		}
	}
	return squeeze(raw)
}

// unpackLevels adds the three curves of levels to t.
func unpackLevels(t *level.Timeline, packed []byte) error {
	raw, err := unsqueeze(packed)
	if err != nil {
		return err
	}
	if len(raw)%6 != 0 {
		return fmt.Errorf("timeline: %d bytes are not three curves of one length", len(raw))
	}
	n := len(raw) / 6
	for _, curve := range []*[]float32{&t.Momentary, &t.ShortTerm, &t.Peak} {
		*curve = make([]float32, n)
		last := int16(0)
		for i := range *curve {
			last += int16(binary.LittleEndian.Uint16(raw[2*i:]))
			(*curve)[i] = unpackLevel(last)
		}
		raw = raw[2*n:]
	}
	return nil
}

// A course is stored as one byte a step, squeezed to some 8 kB an hour: the likelihood of speech in whole percents,
// cut rather than rounded, so that no step passes the half from which it counts as speech; or storedPause.
const storedPause = 255

// packCourse packs a course of n steps; nil stays nil.
func packCourse(c speech.Course, n int) ([]byte, error) {
	if c.Active == nil && c.Speech == nil {
		return nil, nil
	}
	if len(c.Active) != n || len(c.Speech) != n {
		return nil, fmt.Errorf("timeline: a course of %d and %d values beside curves of %d", len(c.Active), len(c.Speech), n)
	}
	raw := make([]byte, n)
	for i, likely := range c.Speech {
		if !(likely >= 0 && likely <= 1) {
			return nil, fmt.Errorf("timeline: speech with a likelihood of %g", likely)
		}
		raw[i] = byte(float64(likely) * 100)
		if !c.Active[i] {
			raw[i] = storedPause
		}
	}
	return squeeze(raw)
}

// unpackCourse returns the course of n steps; nil stays nil.
func unpackCourse(packed []byte, n int) (c speech.Course, err error) {
	if packed == nil {
		return c, nil
	}
	raw, err := unsqueeze(packed)
	if err != nil {
		return c, err
	}
	if len(raw) != n {
		return c, fmt.Errorf("timeline: a course of %d steps beside curves of %d", len(raw), n)
	}
	c = speech.Course{Active: make([]bool, n), Speech: make([]float32, n)}
	for i, b := range raw {
		switch {
		case b == storedPause:
		case b > 100:
			return speech.Course{}, fmt.Errorf("timeline: %d percent of speech", b)
		default:
			c.Active[i], c.Speech[i] = true, float32(b)/100
		}
	}
	return c, nil
}

func squeeze(raw []byte) ([]byte, error) {
	var out bytes.Buffer
	w := zlib.NewWriter(&out)
	if _, err := w.Write(raw); err != nil {
		return nil, err
	}
	err := w.Close()
	return out.Bytes(), err
}

func unsqueeze(packed []byte) ([]byte, error) {
	z, err := zlib.NewReader(bytes.NewReader(packed))
	if err != nil {
		return nil, err
	}
	return io.ReadAll(z)
}

// Timeline returns the curves of a reading, levels to 0.005 dB and the likelihood of speech to 0.01. Active and
// Speech are nil if they were not looked for.
func (s *Store) Timeline(ctx context.Context, readingID int64) (t level.Timeline, err error) {
	what := fmt.Sprintf("timeline of reading %d", readingID)
	err = s.read(ctx, func(tx *sql.Tx) error {
		t, err = one(ctx, tx, scanTimeline, what, `SELECT step, curves, course FROM timelines WHERE reading_id = ?`, readingID)
		return err
	})
	return t, err
}

func scanTimeline(row scanner) (t level.Timeline, err error) {
	var levels, course []byte
	if err := row.Scan(&t.Step, &levels, &course); err != nil {
		return t, err
	}
	if err := unpackLevels(&t, levels); err != nil {
		return t, err
	}
	t.Course, err = unpackCourse(course, len(t.Momentary))
	return t, err
}
