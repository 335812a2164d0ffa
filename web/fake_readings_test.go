package web

import (
	"bytes"
	"context"
	"encoding/binary"
	"math"
	"math/rand/v2"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
	"evenshelf/store"
)

func (f *fake) Readings(ctx context.Context, id int64) (before, after *store.Reading, err error) {
	r, err := f.Recording(ctx, id)
	if err != nil {
		return nil, nil, err
	}
	read := func(kind string, g *store.Figures) *store.Reading {
		if g == nil {
			return nil
		}
		a := level.Unmeasured()
		a.FormatName, a.Decoder, a.Engine, a.Faults = "wav", "native wav", level.Version, []faults.Fault{}
		a.SampleRate, a.Channels, a.Duration, a.MonoRule = 44100, 2, *r.Duration, audio.OneChannel
		a.Integrated, a.Range, a.TruePeak = audio.LUFS(*g.Integrated), audio.LU(*g.Range), audio.DBTP(*g.TruePeak)
		a.ShortTerm10, a.ShortTerm50, a.ShortTerm95 = audio.LUFS(*g.ShortTerm10), audio.LUFS(*g.Integrated-0.6), audio.LUFS(*g.ShortTerm95)
		a.MaxMomentary, a.MaxShortTerm = a.ShortTerm95+2.4, a.ShortTerm95+0.8
		a.PLR, a.SamplePeak = audio.LU(*g.TruePeak-*g.Integrated), audio.DBFS(*g.TruePeak-0.2)
		if r.ID == fromEngine1 {
			a.Engine = "1"
		} else {
			f.inventMore(&a, r)
		}
		if r.Faults > 0 && kind == "before" {
			a.Faults = append(a.Faults,
				faults.Fault{Code: "clipped", Severity: faults.Doubt, At: 83.24, Length: 1.2, Words: "clipped 214 times, first at 1:23.2"},
				faults.Fault{Code: "dropouts", Severity: faults.Doubt, At: 84.1, Length: 0.05, Words: "the sound drops out for 50 ms at 1:24.1"},
				faults.Fault{Code: "head-silence", Severity: faults.Note, Length: 0.3, Words: "0.3 s of silence at the start"},
				faults.Fault{Code: "tail-silence", Severity: faults.Note, At: *r.Duration - 7.4, Length: 7.4, Words: "7.4 s of silence at the end"},
				faults.Fault{Code: "dc-offset", Severity: faults.Note, Length: *r.Duration, Words: "the sound lies 0.7 % of full scale above the middle (DC offset): a cut in it may click"})
		}
		return &store.Reading{ID: id, RecordingID: id, JobID: r.JobID, Kind: kind, MeasuredAt: noon, Analysis: a}
	}
	return read("before", r.Before), read("after", r.After), f.broken
}

// fromEngine1 has readings from before faults and speech were told in figures; inMono has one channel.
const (
	fromEngine1 = 5
	inMono      = 7
)

// inventMore invents the figures that came with engine 2. Every third recording is announced by a voice.
func (f *fake) inventMore(a *level.Analysis, r store.Recording) {
	a.RMS, a.MinPSR, a.NoiseFloor = audio.DBFS(a.Integrated+0.4), a.PLR-3.1, a.ShortTerm10-24
	a.CrestFactor = audio.DB(float64(a.SamplePeak) - float64(a.RMS))
	a.HeadSilence, a.TailSilence, a.Offset = 0.3, 1.2, 0.0002
	a.Correlation, a.Balance = 0.62, -0.4
	a.ActiveTime, a.SpeechTime = audio.Seconds(*r.Duration-4), 0
	if r.ID%3 == 0 {
		a.SpeechTime, a.SpeechLoudness = 21.5, a.Integrated-1.3
	}
	if r.ID == inMono {
		a.Channels, a.Correlation, a.Balance = 1, audio.Ratio(audio.Undefined), audio.DB(audio.Undefined)
	}
}

// inventCourse invents where a recording is heard and where a voice announces it: with breaths, then a pause
// before the music, and again at its end.
func inventCourse(id int64, n int) (active []bool, speech []int) {
	active, speech = make([]bool, n), make([]int, n)
	for i := range n {
		active[i] = i > 3 && i < n-12
		if voice := i < 180 || i > n-110; id%3 == 0 && voice && active[i] {
			active[i] = i%37 > 3 && (i < 160 || i > n-95)
			if active[i] {
				speech[i] = 88
			}
		}
	}
	return active, speech
}

// course invents a timeline that wanders between a recording's foot and head, with a silent second.
func course(id int64, g *store.Figures, length *float64) any {
	if g == nil {
		return nil
	}
	n := int(*length * 10)
	short, moment, peak := make([]*float64, n), make([]*float64, n), make([]*float64, n)
	rng := rand.New(rand.NewPCG(3, 9))
	for i := range n {
		t := float64(i) / 10
		mid := (*g.ShortTerm10 + *g.ShortTerm95) / 2
		half := (*g.ShortTerm95 - *g.ShortTerm10) / 2
		s := mid + half*(0.6*math.Sin(t/17)+0.35*math.Sin(t/5.3+1)+0.2*math.Sin(t/2.1))
		if i > n-12 {
			continue
		}
		short[i], moment[i] = &s, new(s+1.6*rng.NormFloat64())
		peak[i] = new(min(s+10+2*rng.NormFloat64(), *g.TruePeak))
	}
	active, speech := inventCourse(id, n)
	if id == fromEngine1 {
		active, speech = nil, nil
	}
	return gin.H{"short_term": short, "momentary": moment, "peak": peak, "active": active, "speech": speech}
}

// tone is two seconds of a quiet 440 Hz sine as a WAV file.
func tone() []byte {
	const rate, n = 44100, 88200
	var b bytes.Buffer
	b.WriteString("RIFF")
	_ = binary.Write(&b, binary.LittleEndian, uint32(36+2*n))
	b.WriteString("WAVEfmt ")
	_ = binary.Write(&b, binary.LittleEndian, struct {
		Size             uint32
		Tag, Channels    uint16
		Rate, BytesASec  uint32
		Align, BitsASamp uint16
	}{16, 1, 1, rate, 2 * rate, 2, 16})
	b.WriteString("data")
	_ = binary.Write(&b, binary.LittleEndian, uint32(2*n))
	for i := range n {
		_ = binary.Write(&b, binary.LittleEndian, int16(1000*math.Sin(2*math.Pi*440*float64(i)/rate)))
	}
	return b.Bytes()
}
