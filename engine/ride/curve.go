package ride

import (
	"encoding/base64"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"math"
)

// Curve is a gain in dB over time: value i holds at i/10 s, and between two values it runs smoothly.
//
// Its JSON is a string: base64 (RFC 4648 with padding) of the differences from value to value, the first from 0, in
// hundredths of a dB as signed variable-length integers of encoding/binary. A curve of Solve is in whole hundredths
// and so comes back exactly.
type Curve []float32

const (
	perHundred  = 100.0
	mostInCurve = 200 * perHundred // hundredths, either way: far past any gain
)

// MarshalJSON writes the curve. It is an error if a value is not a number or beyond ±200 dB.
func (c Curve) MarshalJSON() ([]byte, error) {
	if c == nil {
		return []byte("null"), nil
	}
	raw := make([]byte, 0, len(c)+len(c)/4)
	last := int64(0)
	for i, v := range c {
		h := math.Round(float64(v) * perHundred)
		if !(math.Abs(h) <= mostInCurve) {
			return nil, fmt.Errorf("gain curve: value %d is %v dB, which is no gain", i, v)
		}
		raw = binary.AppendVarint(raw, int64(h)-last)
		last = int64(h)
	}
	out := make([]byte, 0, base64.StdEncoding.EncodedLen(len(raw))+2)
	out = append(out, '"')
	out = base64.StdEncoding.AppendEncode(out, raw)
	return append(out, '"'), nil
}

// UnmarshalJSON reads what MarshalJSON writes. What is malformed is an error that says where.
func (c *Curve) UnmarshalJSON(b []byte) error {
	var text *string
	if err := json.Unmarshal(b, &text); err != nil {
		return errors.New("gain curve: a string of base64 is expected")
	}
	if text == nil {
		*c = nil
		return nil
	}
	raw, err := base64.StdEncoding.Strict().DecodeString(*text)
	if err != nil {
		return fmt.Errorf("gain curve: %w", err)
	}
	values := make(Curve, 0, len(raw))
	for at, last := 0, int64(0); at < len(raw); {
		d, size := binary.Varint(raw[at:])
		if size <= 0 {
			return fmt.Errorf("gain curve: byte %d begins no whole number", at)
		}
		at += size
		if d < -2*mostInCurve || d > 2*mostInCurve || last+d < -mostInCurve || last+d > mostInCurve {
			return fmt.Errorf("gain curve: value %d is beyond ±200 dB", len(values))
		}
		last += d
		values = append(values, float32(float64(last)/perHundred))
	}
	*c = values
	return nil
}
