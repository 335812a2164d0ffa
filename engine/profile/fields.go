package profile

import "evenshelf/engine/audio"

// fields is every field of a profile, in the order of a file. The bounds keep out what is surely a slip; what lies
// inside is for the one who writes the profile to judge (common practice, no source).
var fields = []Field{
	{Name: "name", Means: "What the profile is called. In a file it may be left out: the file's own name is the profile's."},
	{Name: "summary", Means: "One sentence for a person who has to choose.", Needed: true},
	{Name: "anchor", Means: "What is brought to the target.", Needed: true, Words: []Word{
		{string(Programme), "all of it: its integrated loudness"},
		{string(Speech), "where people speak; the whole programme if nobody does"},
	}},
	{Name: "target_lufs", Means: "Loudness of the anchor that is aimed at.", Unit: "LUFS", Low: -40, High: -8, Needed: true},
	{Name: "tolerance_lu", Means: "How far from the target is near enough.", Unit: "LU", Low: 0.05, High: 3},
	{Name: "ceiling_dbtp", Means: "Highest true peak of the delivered file. It has to be above the target.", Unit: "dBTP", Low: -20, High: 0},
	{Name: "mono", Means: "How the loudness of a recording with one channel is counted.", Words: monoWords()},
	{Name: "within", Means: "What becomes of a recording that already is as the profile asks.", Words: []Word{
		{string(Leave), "its bytes are delivered as they are"},
		{string(Level), "it is levelled all the same"},
	}},
	{Name: "group", Means: "Which recordings share one gain, so that the balance between them stays.", Words: []Word{
		{string(Alone), "none do: each recording has a gain of its own"},
		{string(Folder), "those of one folder, which are brought to the target as one programme; there can be no ride and no compressor then, and the anchor is the programme"},
		{string(Album), "the same for those whose tags name one album; one without is alone"},
	}},

	{Name: "ride.speed", Means: "How fast the ride, the slow gain curve of a recording, follows. With none nothing else in this table matters.", Needed: true, Words: []Word{
		{string(Still), "no ride: one steady gain"},
		{string(Slow), "over some 20 s, or faster where that cannot narrow the range enough; for music"},
		{string(Medium), "over some 6 s, or faster where that cannot; for films and talk"},
		{string(Fast), "over some 2 s; for voice into a transmitter"},
	}},
	{Name: "ride.fastest_s", Means: "The least time constant the ride may come down to where a slower one cannot narrow the range enough, or not without turning loud and soft round. Music keeps its shape with 5 and more.", Unit: "s", Low: 2, High: 20},
	{Name: "ride.strength", Means: "How much of the differences in level the ride takes away. In a file based on film, gentle also brings a wider range, a deadband of 2 dB and no compressor, unless they are given.", Words: []Word{
		{string(Evening), "as much as the range asks, all of it if need be"},
		{string(Gentle), "at least 30 % of a difference stays"},
	}},
	{Name: "ride.range_lu", Means: "A wider loudness range is narrowed to this. It has to be at least twice the deadband.", Unit: "LU", Low: 1, High: 40},
	{Name: "ride.deadband_db", Means: "What is no further from the anchor than this, louder or softer, stays where it is.", Unit: "dB", Low: 0, High: 20},
	{Name: "ride.lift_db", Means: "The most the ride may raise.", Unit: "dB", Low: 0, High: 40},
	{Name: "ride.cut_db", Means: "The most the ride may lower.", Unit: "dB", Low: 0, High: 40},
	{Name: "ride.step_db2s", Means: "What a step of the gain at a pause has to be worth, for voices that differ: one of d dB is made if it holds for this divided by d², in seconds. 0 makes no steps.", Unit: "dB²·s", Low: 0, High: 1000},
	{Name: "ride.silence_s", Means: "A pause as long as this is meant: its gain is the lower of those before and after it, and no step of the gain is heard in it.", Unit: "s", Low: 0.5, High: 60},
	{Name: "ride.fades", Means: "What the ride does to a fade at the start or the end.", Words: []Word{
		{string(KeepFades), "the gain stands still"},
		{string(RideFades), "it is ridden like everything else"},
	}},

	{Name: "compressor.over_db", Means: "Threshold of the compressor, over the loudness of the ridden sound. It goes by the loudness of the moment, over 6 ms: the loud half of a syllable is some 6 dB over the whole.", Unit: "dB", Low: 0, High: 30},
	{Name: "compressor.ratio", Means: "How much of what rises over the threshold stays: with 3 a third. 1 is no compressor.", Low: 1, High: 20},
	{Name: "compressor.knee_db", Means: "Width of the soft knee around the threshold.", Unit: "dB", Low: 0, High: 24},
	{Name: "compressor.release_ms", Means: "How long the compressor takes to let go.", Unit: "ms", Low: 20, High: 2000},

	{Name: "limiter.most_db", Means: "The most that may be taken off the loudest moment. At 0 peaks are not touched: the gain stops where they meet the ceiling.", Unit: "dB", Low: 0, High: 20},
	{Name: "limiter.look_ahead_ms", Means: "How long before a peak the limiter begins to lower the gain.", Unit: "ms", Low: 0.5, High: 20},
	{Name: "limiter.hold_ms", Means: "How long the gain stays low after a peak. Long keeps low notes clean, short touches less of the sound.", Unit: "ms", Low: 0, High: 100},
	{Name: "limiter.release_ms", Means: "How long the limiter takes to let go.", Unit: "ms", Low: 5, High: 2000},

	{Name: "delivered.format", Means: "What a recording is delivered in.", Words: []Word{
		{string(OwnFormat), "the format of the source"},
		{string(WAV), "WAV, RF64 where it is longer than 4 GiB"},
		{string(FLAC), "FLAC"},
		{string(MP3), "MP3"},
		{string(M4A), "AAC in M4A"},
		{string(Vorbis), "Vorbis in Ogg"},
		{string(Opus), "Opus in Ogg"},
	}},
	{Name: "delivered.bit_rate_kbps", Means: "Bit rate of a lossy format; 0 is the source's own, or the format's best if that has none.", Unit: "kbit/s", Numbers: []int{0, 32, 48, 64, 80, 96, 112, 128, 160, 192, 224, 256, 320}},
	{Name: "delivered.bits", Means: "Word length of the delivered sound; 0 is the source's own.", Unit: "bits", Numbers: []int{0, 16, 24, 32}},
	{Name: "delivered.dither", Means: "The noise that hides rounding to a word length.", Words: []Word{
		{string(Triangular), "two independent uniform draws, ±1 LSB in all"},
		{string(Shaped), "the same, its noise moved to where hearing is least sensitive; for the last step before listening"},
		{string(NoDither), "plain rounding"},
	}},
	{Name: "delivered.film", Means: "Where the levelled sound of a film goes.", Words: []Word{
		{string(AddTrack), "a further track, beside all that were there"},
		{string(ReplaceTrack), "in the place of the track it was made from"},
	}},
	{Name: "delivered.downmix", Means: "What becomes of sound with more than two channels.", Words: []Word{
		{string(AllChannels), "all channels stay"},
		{string(StereoMix), "mixed down to two, with the coefficients of ITU-R BS.775"},
	}},

	{Name: "harm.limited_1db", Means: "Held if more than 1 dB is limited for more than this share of the time in which something is heard.", Low: 0, High: 1},
	{Name: "harm.limited_3db", Means: "The same for more than 3 dB; not more than the share for 1 dB.", Low: 0, High: 1},
	{Name: "harm.limited_6db", Means: "The same for more than 6 dB; not more than the share for 3 dB.", Low: 0, High: 1},
	{Name: "harm.lift_db", Means: "Held if any part needs more gain than this: past it, noise is what is lifted.", Unit: "dB", Low: 0, High: 60},
	{Name: "harm.floor_lift_db", Means: "Held if the gain in a pause, and the noise with it, comes up by more than this over the lower of the gains before and after it.", Unit: "dB", Low: 0, High: 40},
	{Name: "harm.order", Means: "Held if the order of loud and soft is kept less than this: rank correlation (Spearman) of the loudness of 3 s blocks before and after, in recordings of a minute and longer. -1 asks for none.", Low: -1, High: 1},
	{Name: "harm.range_over_lu", Means: "Held if the loudness range stays wider than asked for by more than this, fades apart, in recordings of 20 s and longer. What is wider by half of one is left as it is.", Unit: "LU", Low: 0.5, High: 40},
	{Name: "harm.range_lost_lu", Means: "Held if the loudness range becomes narrower than asked for, or than it was if that is less, by more than this, in recordings of 20 s and longer.", Unit: "LU", Low: 0, High: 40},
	{Name: "harm.speech_share", Means: "Held if less than this share of what is heard is speech, where speech is the anchor.", Low: 0, High: 1},
	{Name: "harm.speech_likelihood", Means: "Held if what is taken for speech is less likely than this to be speech, on average, and has another loudness than the whole, where speech is the anchor.", Low: 0, High: 1},
}

func monoWords() []Word {
	words := make([]Word, len(audio.MonoRules))
	for i, r := range audio.MonoRules {
		words[i] = Word{string(r), r.Words()}
	}
	return words
}

// tables are the tables of a file, in its order, with what they hold.
var tables = []Word{
	{"ride", "The slow gain curve of a recording, as an engineer rides a fader."},
	{"compressor", "Takes down what the ride is too slow for."},
	{"limiter", "Keeps the peaks under the ceiling."},
	{"delivered", "How the sound is written."},
	{"harm", "Limits of harm: past one, a copy is held for a person to listen to."},
}
