package audio

import (
	"encoding/json"
	"math"
	"strconv"
)

// One defined type per quantity keeps a gain from being added to a peak by mistake.
//
// A figure that is not defined (silence, too short a programme) is NaN or ±Inf in memory and null in
// JSON; Defined tells the two apart. It is never written as 0.
type (
	// LUFS is a programme loudness re full scale, as ITU-R BS.1770 defines it; digital silence is −Inf.
	LUFS float64
	// LU is a difference of loudness; 1 LU = 1 dB.
	LU float64
	// DB is a gain or a ratio; +6.02 dB doubles the samples.
	DB float64
	// DBTP is a true peak re full scale (ITU-R BS.1770 Annex 2).
	DBTP float64
	// DBFS is a sample peak re full scale.
	DBFS float64
	// Ratio is a plain number, such as a correlation.
	Ratio float64
	// Seconds is a length of time.
	Seconds float64
)

// Undefined is the figure that could not be measured.
var Undefined = math.NaN()

// Defined reports whether a figure holds a finite value.
func Defined[F ~float64](f F) bool {
	v := float64(f)
	return !math.IsNaN(v) && !math.IsInf(v, 0)
}

// Sub returns the loudness difference l − m.
func (l LUFS) Sub(m LUFS) LU { return LU(l - m) }

// Linear returns the factor samples are multiplied by: 10^(g/20).
func (g DB) Linear() float64 { return math.Pow(10, float64(g)/20) }

// Linear returns the amplitude of a peak re full scale: 10^(p/20).
func (p DBTP) Linear() float64 { return math.Pow(10, float64(p)/20) }

// ToDB returns 20·log10(amplitude); 0 gives −Inf.
func ToDB(amplitude float64) float64 { return 20 * math.Log10(amplitude) }

// MarshalJSON writes the figure to four decimals, or null.
func (l LUFS) MarshalJSON() ([]byte, error) { return marshalFigure(float64(l)) }

// MarshalJSON writes the figure to four decimals, or null.
func (l LU) MarshalJSON() ([]byte, error) { return marshalFigure(float64(l)) }

// MarshalJSON writes the figure to four decimals, or null.
func (g DB) MarshalJSON() ([]byte, error) { return marshalFigure(float64(g)) }

// MarshalJSON writes the figure to four decimals, or null.
func (p DBTP) MarshalJSON() ([]byte, error) { return marshalFigure(float64(p)) }

// MarshalJSON writes the figure to four decimals, or null.
func (p DBFS) MarshalJSON() ([]byte, error) { return marshalFigure(float64(p)) }

// MarshalJSON writes the number to four decimals, or null.
func (r Ratio) MarshalJSON() ([]byte, error) { return marshalFigure(float64(r)) }

// MarshalJSON writes the time to four decimals, or null.
func (s Seconds) MarshalJSON() ([]byte, error) { return marshalFigure(float64(s)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (l *LUFS) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(l)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (l *LU) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(l)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (g *DB) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(g)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (p *DBTP) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(p)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (p *DBFS) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(p)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (r *Ratio) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(r)) }

// UnmarshalJSON reads a number; null becomes Undefined.
func (s *Seconds) UnmarshalJSON(b []byte) error { return unmarshalFigure(b, (*float64)(s)) }

func marshalFigure(v float64) ([]byte, error) {
	if !Defined(v) {
		return []byte("null"), nil
	}
	r := math.Round(v*1e4) / 1e4
	if r == 0 {
		r = 0 // not "-0"
	}
	return strconv.AppendFloat(nil, r, 'f', -1, 64), nil
}

func unmarshalFigure(b []byte, v *float64) error {
	if string(b) == "null" {
		*v = Undefined
		return nil
	}
	return json.Unmarshal(b, v)
}
