package dynamics

import "evenshelf/engine/audio"

// Compression says how a compressor works.
type Compression struct {
	Threshold audio.DB // level of the sound, dB re full scale, mean power of … (see NewCompressor)
	Ratio     float64
	Knee      audio.DB
	Release   float64 // s
}
