//go:build ignore

// Features prints what the likelihood of speech is made from, for fitting the coefficients. Each argument is a
// file of raw samples, 32-bit floats, little-endian, one channel at 16 kHz. Beside each it writes a file of the same
// name and .features: for every step one float32 that is 1 where the programme is active, then the features.
package main

import (
	"encoding/binary"
	"log"
	"math"
	"os"

	"evenshelf/engine/audio"
	"evenshelf/engine/speech"
)

func main() {
	for _, path := range os.Args[1:] {
		raw, err := os.ReadFile(path)
		if err != nil {
			log.Fatal(err)
		}
		x := make([]float32, len(raw)/4)
		for i := range x {
			x[i] = math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:]))
		}
		d := speech.New(audio.Format{Rate: 16000, Layout: audio.Mono})
		d.Write(audio.Block{x})
		active, steps := d.Features()
		var out []byte
		for i, on := range active {
			first := float32(0)
			if on {
				first = 1
			}
			out = binary.LittleEndian.AppendUint32(out, math.Float32bits(first))
			for _, v := range steps[i] {
				out = binary.LittleEndian.AppendUint32(out, math.Float32bits(float32(v)))
			}
		}
		if err := os.WriteFile(path+".features", out, 0o644); err != nil {
			log.Fatal(err)
		}
	}
}
