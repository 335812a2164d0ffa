package demo

import (
	"slices"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// How a recording is stored.
func wav(layout audio.Layout, rate, bits int) media.Spec {
	codec := map[int]string{16: "pcm_s16le", 24: "pcm_s24le"}[bits]
	return media.Spec{Container: "wav", Codec: codec, Format: audio.Format{Rate: rate, Layout: layout}, BitDepth: bits, Extension: ".wav"}
}

func floatWAV(layout audio.Layout, rate int) media.Spec {
	return media.Spec{Container: "wav", Codec: "pcm_f32le", Format: audio.Format{Rate: rate, Layout: layout}, BitDepth: 32, Float: true, Extension: ".wav"}
}

func flac(layout audio.Layout, rate, bits int) media.Spec {
	return media.Spec{Container: "flac", Codec: "flac", Format: audio.Format{Rate: rate, Layout: layout}, BitDepth: bits, Extension: ".flac"}
}

func mp3(layout audio.Layout, rate, bitRate int) media.Spec {
	return media.Spec{Container: "mp3", Codec: "mp3", Format: audio.Format{Rate: rate, Layout: layout}, BitRate: bitRate, Extension: ".mp3"}
}

func vorbis(layout audio.Layout, rate, bitRate int) media.Spec {
	return media.Spec{Container: "ogg", Codec: "vorbis", Format: audio.Format{Rate: rate, Layout: layout}, BitRate: bitRate, Extension: ".ogg"}
}

var (
	mono, stereo = audio.Mono, audio.Stereo
	surround51   = audio.UsualLayout(6)
)

// recorded makes an item of sound mastered to a loudness. The path comes without its extension; it is also
// the name from which the piece draws its chance.
func recorded(path, about string, spec media.Spec, lufs audio.LUFS, top audio.DBFS, piece render) Item {
	return Item{
		Path: path + spec.Extension, About: about, Loudness: lufs, Spec: spec,
		Build: func() audio.Block {
			b := piece(path)
			master(b, spec.Format, lufs, top)
			return b
		},
	}
}

// spoilt makes a damaged item: sound (or nil), stored as the spec says, then spoilt (or not, if nil).
func spoilt(path, about string, spec media.Spec, build func() audio.Block, spoil func([]byte) []byte) Item {
	return Item{
		Path: path + spec.Extension, About: about, Damaged: true, Loudness: audio.LUFS(audio.Undefined),
		Spec: spec, Build: build, spoil: spoil,
	}
}

// render is a piece with everything settled but the name its chance is drawn from.
type render func(name string) audio.Block

func talking(t talker, rate int, seconds, noise float64) render {
	return func(name string) audio.Block { return alone(name, t, rate, seconds, noise) }
}

func playing(piece func(name string, rate, bars int) song, rate, bars int) render {
	return func(name string) audio.Block { return piece(name, rate, bars).play().block() }
}

func staging(piece func(name string, rate int, seconds float64) *stage, rate int, seconds float64) render {
	return func(name string) audio.Block { return piece(name, rate, seconds).block() }
}

func scening(piece func(name string, rate int, seconds float64) audio.Block, rate int, seconds float64) render {
	return func(name string) audio.Block { return piece(name, rate, seconds) }
}

// Shelf returns everything there is, folder by folder. The station, its people, its music and its
// languages are invented.
func Shelf() []Item {
	return slices.Concat(talk(), music(), concert(), film(), tape(), damaged())
}

func talk() []Item {
	whisperer, crier, reader := cleo, boris, ada
	whisperer.breath, whisperer.pauses = 1, 1.3
	crier.effort, crier.pitch, crier.lilt, crier.pauses = 1, 190, 5, 0.6
	reader.pace, reader.lilt, reader.pauses = 3.4, 2.5, 1.5
	return []Item{
		recorded("talk/allotment-hour", "A gardening talk in an unhurried voice.",
			mp3(mono, 44100, 96000), -20.4, -1, talking(boris, 44100, 30, -50)),
		recorded("talk/harbour-report", "A brisk bulletin, read close to the microphone.",
			wav(mono, 48000, 16), -16.2, -1, talking(cleo, 48000, 16, -55)),
		recorded("talk/lecture-from-the-back-row", "A talk recorded far too low, the recorder's hiss close under it.",
			flac(mono, 44100, 16), -41.8, -3, scening(distant, 44100, 28)),
		recorded("talk/sunday-league-second-half", "A commentator over a crowd that roars twice.",
			flac(stereo, 44100, 16), -12.9, -0.6, scening(commentary, 44100, 20)),
		recorded("talk/morning-desk", "The station's day, announced.",
			flac(mono, 44100, 16), -23.1, -1, talking(ada, 44100, 22, -55)),
		recorded("talk/neighbours-at-the-table", "An interview whose guest sat 16 dB too far away.",
			flac(stereo, 32000, 16), -22.3, -1, func(name string) audio.Block { return interview(name, 32000, 62, 16) }),
		recorded("talk/phone-in", "A presenter in the studio and a caller on a narrow line.",
			wav(mono, 32000, 16), -18.9, -1, scening(phoneIn, 32000, 26)),
		recorded("talk/plea-for-the-footbridge", "A speech shouted through a market.",
			wav(mono, 22050, 16), -10.7, -0.4, talking(crier, 22050, 15, -38)),
		recorded("talk/whispered-from-the-hide", "Whispering beside a nest, recorded with care but low.",
			wav(mono, 44100, 24), -38.2, -3, talking(whisperer, 44100, 12, -36)),
		recorded("talk/a-very-long-name/"+longName, "A reading under a name that somebody meant well.",
			wav(mono, 22050, 16), -31.4, -1, talking(reader, 22050, 18, -48)),
		recorded("talk/Θαλμορίνα και Βερέδι", "A reading in an invented language under a Greek-lettered name.",
			wav(mono, 22050, 16), -27.2, -1, talking(ada, 22050, 18, -48)),
		recorded("talk/مرسونا ولالبير", "A reading in an invented language under a name written from right to left.",
			flac(mono, 32000, 16), -14.6, -1, talking(boris, 32000, 20, -50)),
	}
}

// longName is 200 characters long, within the 255 bytes a file system gives a name.
var longName = strings.TrimSuffix(strings.Repeat("the second part of the third reading of the long letter, ", 4)[:200], " ")

func music() []Item {
	return []Item{
		recorded("music/copper-kettle-parade", "A marching tune for brass and drums.",
			flac(stereo, 32000, 16), -12.2, -0.5, playing(march, 32000, 20)),
		recorded("music/flat-tyre-shuffle", "A slow shuffle with a plucked lead, transferred very low.",
			flac(stereo, 44100, 16), -34.1, -1, playing(blues, 44100, 8)),
		recorded("music/eight-lanes-of-light", "A dance track pressed up as far as it goes.",
			mp3(stereo, 44100, 192000), -7.2, -0.6, playing(anthem, 44100, 12)),
		recorded("music/two-by-the-stove", "Two plucked instruments by a fire, peaks standing far out.",
			flac(stereo, 96000, 24), -25.3, -1, playing(campfire, 96000, 3)),
		recorded("music/late-for-the-last-ferry", "Everybody as fast as they can.",
			flac(stereo, 44100, 16), -8.6, -0.4, playing(gallop, 44100, 12)),
		recorded("music/kerb-and-gutter", "A strut with a late second beat.",
			vorbis(stereo, 44100, 160000), -9.8, -0.8, playing(strut, 44100, 9)),
		recorded("music/lullaby-for-a-night-bus", "A lullaby on metal bars.",
			flac(stereo, 44100, 16), -36.6, -2, playing(lullaby, 44100, 12)),
		recorded("music/level-crossing-strut", "A strut that is already at −18 LUFS and should be left alone.",
			wav(stereo, 44100, 16), -18, -2, playing(strut, 44100, 5)),
		recorded("music/north-of-the-ring-road", "Slow electronic weather, players entering one by one.",
			mp3(stereo, 48000, 160000), -15.3, -1, playing(drift, 48000, 16)),
		recorded("music/ninety-paper-boats", "A ballad that grows.",
			vorbis(stereo, 48000, 128000), -23.8, -1, playing(ballad, 48000, 9)),
		recorded("music/rain-on-corrugated-iron", "An offbeat song with a lot of room in it.",
			flac(stereo, 44100, 16), -13.7, -0.5, playing(offbeat, 44100, 7)),
		recorded("music/the-long-way-to-the-pier", "A waltz for reeds.",
			wav(stereo, 32000, 16), -19.6, -1, playing(waltz, 32000, 12)),
		recorded("music/unplugged-at-the-library", "A plucked song with wide peaks, recorded low.",
			flac(stereo, 44100, 16), -29.5, -1, playing(campfire, 44100, 11)),
		recorded("jingles/half-past", "A sting of four seconds, pressed up.",
			wav(stereo, 44100, 16), -8.1, -0.5, playing(gallop, 44100, 2)),
		recorded("jingles/top-of-the-hour", "Brass announcing the hour.",
			wav(stereo, 48000, 16), -11.4, -0.5, playing(march, 48000, 4)),
		recorded("jingles/weather", "Bars and a pad before the forecast, far too quiet.",
			floatWAV(stereo, 48000), -28.4, -1, playing(lullaby, 48000, 2)),
	}
}

func concert() []Item {
	return []Item{
		recorded("concert/evening-choir", "A choir of many voices in a long room.",
			flac(stereo, 32000, 16), -26.4, -1, staging(choir, 32000, 27)),
		recorded("concert/tide-over-the-sea-wall", "An orchestra that grows from nothing to everything and falls back: the widest range here.",
			flac(stereo, 44100, 16), -21.5, -0.5, staging(swell, 44100, 66)),
		recorded("concert/seven-quiet-rooms", "A slow piece for one piano, left with a lot of headroom.",
			flac(stereo, 44100, 16), -32.7, -1, staging(solo, 44100, 40)),
	}
}

func film() []Item {
	return []Item{
		recorded("film/scene-12-cellar-door", "Whispers, doors that slam, and music coming up.",
			flac(stereo, 48000, 16), -30.2, -3, func(name string) audio.Block { return shoot(name, 48000, 30).stereo() }),
		recorded("film/scene-31-tide-room", "A film scene mixed for six loudspeakers.",
			wav(surround51, 48000, 16), -24.7, -1, func(name string) audio.Block { return shoot(name, 48000, 9).surround() }),
	}
}

func tape() []Item {
	return []Item{
		recorded("tape/reel-3-village-band", "A waltz on a worn reel: dull, wavering, crackling.",
			wav(mono, 44100, 16), -33.3, -1, func(name string) audio.Block {
				s := waltz(name, 44100, 13).play()
				return reel(name, 44100, s.l, wear{hiss: -28, hum: -26, wow: 0.004, crackle: 9, top: 6000})
			}),
		recorded("tape/reel-11-ferryman", "An old man's story under hum and hiss.",
			flac(mono, 44100, 16), -17.1, -1, func(name string) audio.Block {
				t := boris.speak(dice(name), 44100, 24)
				return reel(name, 44100, t, wear{hiss: -24, hum: -20, wow: 0.0025, crackle: 3, top: 5200})
			}),
		recorded("tape/reel-12-ferryman-continued", "The same story, the machine readjusted and the level lost.",
			wav(mono, 22050, 16), -39.6, -3, func(name string) audio.Block {
				t := boris.speak(dice(name), 22050, 20)
				return reel(name, 22050, t, wear{hiss: -22, hum: -24, wow: 0.0025, crackle: 3, top: 6000})
			}),
	}
}

func damaged() []Item {
	spoken := func(rate int, seconds float64) func() audio.Block {
		return func() audio.Block {
			b := talking(ada, rate, seconds, -50)("damaged")
			master(b, audio.Format{Rate: rate, Layout: mono}, -20, -1)
			return b
		}
	}
	text := media.Spec{Extension: ".mp3"}
	return []Item{
		spoilt("damaged/absurd-header", "A WAV file whose format chunk claims two thousand million bytes.",
			wav(mono, 22050, 16), spoken(22050, 8), patched(4, uint32(0x7ffffff0))),
		spoilt("damaged/cut-short", "A WAV file cut off in the middle of its data by a broken copy.",
			wav(mono, 44100, 16), spoken(44100, 20), cutShort),
		spoilt("damaged/letter-to-the-station", "A letter saved under the name of a song.",
			text, nil, replaced(letter)),
		spoilt("damaged/no-channels", "A WAV file that says it has no channels.",
			wav(mono, 22050, 16), spoken(22050, 8), patched(10, uint16(0))),
		spoilt("damaged/nothing-at-all", "A file of no bytes.",
			wav(mono, 44100, 16), nil, emptied),
		spoilt("damaged/overdriven", "A talk recorded with the level all the way up: most syllables are cut off flat.",
			wav(mono, 44100, 16), func() audio.Block { return overdriven("damaged/overdriven", 44100, 10) }, nil),
		spoilt("damaged/saturday-programme", "A playlist saved under the name of one of its songs.",
			text, nil, replaced(playlist())),
		spoilt("damaged/scratched", "A FLAC file with a bad patch in its middle.",
			flac(mono, 44100, 16), spoken(44100, 16), scratched),
		spoilt("damaged/silent", "Twelve seconds of digital silence.",
			wav(mono, 22050, 16), func() audio.Block { return mute(1, 22050, 12) }, nil),
	}
}
