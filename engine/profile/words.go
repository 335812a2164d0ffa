package profile

import (
	"fmt"
	"math"
	"strings"

	"evenshelf/engine/audio"
)

// Section is a part of what a profile does, in plain sentences.
type Section struct {
	Title string   `json:"title"`
	Words []string `json:"words"`
}

// Words say what the profile does to a recording, for people who look after recordings.
func (p Profile) Words() []Section {
	return []Section{
		{"Loudness", p.loudnessWords()},
		{"Ride", p.rideWords()},
		{"Compressor", []string{p.compressorWords()}},
		{"Peaks", p.peakWords()},
		{"Delivered", p.deliveredWords()},
		{"Held for you when", p.harmWords()},
		{"Mind", []string{
			"Loud playback harms hearing: start quiet when you listen to what came out, as the dashboard's player does.",
			"Levelling does not replace a station's own protection before the transmitter; the licence and local rules stand.",
		}},
	}
}

func (p Profile) loudnessWords() []string {
	what, otherwise := "The whole programme", ""
	if p.Anchor == Speech {
		what, otherwise = "Speech", "; where nobody speaks, the whole programme is"
	}
	words := []string{
		fmt.Sprintf("%s is brought to %s, within %s%s.", what, withUnit(float64(p.Target), "LUFS"), withUnit(float64(p.Tolerance), "LU"), otherwise),
		fmt.Sprintf("A recording with one channel counts %s.", p.Mono.Words()),
	}
	switch p.Group {
	case Folder:
		words = append(words, "The recordings of a folder share one gain, so that the balance between them stays.")
	case Album:
		words = append(words, "The recordings of an album, by their tags, share one gain, so that the balance between them stays.")
	}
	if p.Within == Leave {
		return append(words, "What is so already is delivered as it is, byte for byte.")
	}
	return append(words, "What is so already is levelled all the same.")
}

func (p Profile) rideWords() []string {
	r := p.Ride
	if r.Speed == Still {
		return []string{"There is no ride: one steady gain from start to end."}
	}
	words := []string{
		fmt.Sprintf("The ride is %s: it raises by %s and lowers by %s at the most.",
			map[Speed]string{Slow: "slow", Medium: "of medium speed", Fast: "fast"}[r.Speed], decibels(r.Lift), decibels(r.Cut)),
		fmt.Sprintf("Its time constant does not go under %s.", withUnit(float64(r.Fastest), "s")),
		fmt.Sprintf("A loudness range wider than %s is narrowed to that%s.", withUnit(float64(r.Range), "LU"),
			map[bool]string{true: ", but at least 30 % of each difference stays"}[r.Strength == Gentle]),
	}
	if r.Deadband > 0 {
		words = append(words, fmt.Sprintf("What is within %s of the %s stays where it is.", decibels(r.Deadband), p.Anchor))
	}
	if r.Step > 0 {
		words = append(words, fmt.Sprintf("It steps in pauses between voices: for a difference of 6 dB if that holds for %s.",
			withUnit(math.Round(r.Step/36*10)/10, "s")))
	} else {
		words = append(words, "It glides and makes no steps.")
	}
	words = append(words, fmt.Sprintf("A pause of %s or more is meant: it gets the lower of the gains before and after it.", withUnit(float64(r.Silence), "s")))
	if r.Fades == KeepFades {
		return append(words, "It stands still in fades at the start and the end.")
	}
	return append(words, "Fades at the start and the end are ridden like everything else.")
}

func (p Profile) compressorWords() string {
	c := p.Compressor
	if c.Ratio == 1 {
		return "There is no compressor."
	}
	return fmt.Sprintf("What rises more than %s over the loudness of the whole is held back, %s:1, with a soft knee of %s and a release of %s.",
		decibels(c.Over), number(c.Ratio), decibels(c.Knee), withUnit(c.Release, "ms"))
}

func (p Profile) peakWords() []string {
	first := fmt.Sprintf("No true peak passes %s.", withUnit(float64(p.Ceiling), "dBTP"))
	if p.Limiter.Most == 0 {
		return []string{first, "Peaks are not touched: the gain stops where they meet the ceiling, even short of the target."}
	}
	return []string{first, fmt.Sprintf("To get there the loudest moment may be limited by up to %s (look-ahead %s, hold %s, release %s).", decibels(p.Limiter.Most),
		withUnit(p.Limiter.LookAhead, "ms"), withUnit(p.Limiter.Hold, "ms"), withUnit(p.Limiter.Release, "ms"))}
}

// formatWords are the formats as people know them.
var formatWords = map[Format]string{WAV: "WAV", FLAC: "FLAC", MP3: "MP3", M4A: "AAC in M4A", Vorbis: "Vorbis in Ogg", Opus: "Opus in Ogg"}

func (p Profile) deliveredWords() []string {
	d := p.Delivered
	format, length := "the format of the source", "the word length of the source"
	if d.Format != OwnFormat {
		format = formatWords[d.Format]
	}
	if d.Bits != 0 {
		length = fmt.Sprintf("%d bits", d.Bits)
	}
	dither := map[Dither]string{Triangular: "with triangular dither", Shaped: "with dither whose noise is shaped", NoDither: "without dither"}[d.Dither]
	words := []string{fmt.Sprintf("In %s; where that keeps whole numbers, in %s, %s.", format, length, dither)}
	if d.BitRate != 0 {
		words = append(words, fmt.Sprintf("A lossy format gets %d kbit/s.", d.BitRate))
	}
	film := "The levelled sound of a film becomes a further track; pictures, subtitles and other tracks stay as they are"
	if d.Film == ReplaceTrack {
		film = "The levelled sound of a film takes the place of its track; pictures, subtitles and other tracks stay as they are"
	}
	if d.Downmix == StereoMix {
		return append(words, film+".", "More than two channels are mixed down to stereo, with the coefficients of ITU-R BS.775.")
	}
	return append(words, film+".")
}

// harmWords leaves out the limits that cannot be met with in this profile.
func (p Profile) harmWords() []string {
	h, rides := p.Harm, p.Ride.Speed != Still
	words := []string{"the recording is damaged, or its copy did not come out as asked"}
	if p.Limiter.Most > 0 {
		words = append(words,
			fmt.Sprintf("the target would need more than %s of limiting", decibels(p.Limiter.Most)),
			fmt.Sprintf("the limiter takes off more than 1 dB for over %s of the time in which something is heard, more than 3 dB for over %s or more than 6 dB for over %s",
				percent(h.Over1), percent(h.Over3), percent(h.Over6)))
	}
	words = append(words, fmt.Sprintf("a part has to be lifted by more than %s, and its noise with it", decibels(h.Lift)))
	if rides {
		words = append(words,
			fmt.Sprintf("the gain in a pause, and its noise, comes up by more than %s over the lower of those before and after", decibels(h.Floor)),
			fmt.Sprintf("the loudness range stays more than %s wider than asked for, or becomes more than %s narrower",
				withUnit(float64(h.RangeOver), "LU"), withUnit(float64(h.RangeLost), "LU")))
	}
	if h.Order > -1 && (rides || p.Compressor.Ratio > 1) {
		words = append(words, fmt.Sprintf("loud and soft passages change places: their order agrees with the original's by less than %s (rank correlation)", number(float64(h.Order))))
	}
	if p.Anchor == Speech && h.SpeechShare > 0 {
		words = append(words, fmt.Sprintf("less than %s of what is heard is speech", percent(h.SpeechShare)))
	}
	if p.Anchor == Speech && h.SpeechLikelihood > 0 {
		words = append(words, fmt.Sprintf("it is less than %s likely that what is taken for speech is speech, and its loudness is not that of the whole", percent(h.SpeechLikelihood)))
	}
	return words
}

func decibels(v audio.DB) string { return withUnit(float64(v), "dB") }

// percent keeps the decimals of a share such as 0.0025, and none that only binary fractions make.
func percent(v audio.Ratio) string {
	s := audio.Number(100*float64(v), 2)
	return strings.TrimSuffix(strings.TrimRight(s, "0"), ".") + " %"
}
