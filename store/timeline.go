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

	"evenshelf/engine/meter"
)

// A timeline is stored as the curves Momentary, ShortTerm and Peak one after another, each a little-endian
// int16 a value: the difference, in hundredths of dB and wrapping round, from the value before it. Small
// differences squeeze well (zlib), and an hour of speech takes some 90 kB instead of 430.
//
// The error of a value is at most 0.005 dB and does not add up, because the differences are taken between
// rounded values. −Inf and NaN are kept apart as two values below the lowest level, −327.66 dB; levels
// outside ±327.66 dB are cut to it.
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

func packTimeline(t meter.Timeline) ([]byte, error) {
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
	var out bytes.Buffer
	w := zlib.NewWriter(&out)
	if _, err := w.Write(raw); err != nil {
		return nil, err
	}
	err := w.Close()
	return out.Bytes(), err
}

func unpackTimeline(step float64, packed []byte) (t meter.Timeline, err error) {
	z, err := zlib.NewReader(bytes.NewReader(packed))
	if err != nil {
		return t, err
	}
	raw, err := io.ReadAll(z)
	if err != nil {
		return t, err
	}
	if len(raw)%6 != 0 {
		return t, fmt.Errorf("timeline: %d bytes are not three curves of one length", len(raw))
	}
	n := len(raw) / 6
	t.Step = step
	for _, curve := range []*[]float32{&t.Momentary, &t.ShortTerm, &t.Peak} {
		*curve = make([]float32, n)
		last := int16(0)
		for i := range *curve {
			last += int16(binary.LittleEndian.Uint16(raw[2*i:]))
			(*curve)[i] = unpackLevel(last)
		}
		raw = raw[2*n:]
	}
	return t, nil
}

// Timeline returns the curves of a reading, to 0.005 dB.
func (s *Store) Timeline(ctx context.Context, readingID int64) (t meter.Timeline, err error) {
	what := fmt.Sprintf("timeline of reading %d", readingID)
	err = s.read(ctx, func(tx *sql.Tx) error {
		t, err = one(ctx, tx, func(row scanner) (meter.Timeline, error) {
			var step float64
			var packed []byte
			if err := row.Scan(&step, &packed); err != nil {
				return meter.Timeline{}, err
			}
			return unpackTimeline(step, packed)
		}, what, `SELECT step, curves FROM timelines WHERE reading_id = ?`, readingID)
		return err
	})
	return t, err
}
