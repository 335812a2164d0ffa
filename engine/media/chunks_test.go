package media

import (
	"encoding/json"
	"math"
	"strings"
	"testing"
	"time"

	"evenshelf/engine/audio"
)

// chunkDump is another reader of chunks, in another language: it prints [letters, body in hex] for every chunk of a
// RIFF, RF64, BW64 or FORM file, and fails where lengths do not add up to the file's.
const chunkDump = `
import json, struct, sys
b = open(sys.argv[1], "rb").read()
order = ">" if b[:4] == b"FORM" else "<"
total, = struct.unpack(order + "I", b[4:8])
big = {}
if b[:4] in (b"RF64", b"BW64"):
    assert b[12:16] == b"ds64"
    total, big["data"] = struct.unpack("<QQ", b[20:36])
assert total + 8 == len(b), (total, len(b))
at, out = 12, []
while at < len(b):
    name, n = b[at:at+4].decode("latin-1"), struct.unpack(order + "I", b[at+4:at+8])[0]
    if n == 0xFFFFFFFF:
        n = big[name]
    assert at + 8 + n <= len(b), name
    out.append([name, b[at+8:at+8+n].hex()])
    assert n % 2 == 0 or b[at+8+n] == 0, "padding of " + name
    at += 8 + n + n % 2
assert at == len(b)
print(json.dumps(out))
`

// dump returns a file's chunks by that reader, without those of the given letters.
func dump(t *testing.T, path string, without ...string) [][2]string {
	t.Helper()
	var all, kept [][2]string
	if err := json.Unmarshal(run(t, "/usr/bin/python3", "-c", chunkDump, path), &all); err != nil {
		t.Fatal(err)
	}
	for _, c := range all {
		if c[0] == "data" || c[0] == "SSND" {
			c[1] = "" // the place matters here
		}
		if !strings.Contains(strings.Join(without, "|"), c[0]) {
			kept = append(kept, c)
		}
	}
	return kept
}

// sameChunks fails unless two files have the same chunks in the same order, but for those described by the samples.
func sameChunks(t *testing.T, got, want string, without ...string) {
	t.Helper()
	a, b := dump(t, got, without...), dump(t, want, without...)
	if len(a) != len(b) {
		t.Fatalf("%d chunks, want %d: %.300v, %.300v", len(a), len(b), a, b)
	}
	for i := range b {
		if a[i] != b[i] {
			t.Errorf("chunk %d is %.200q, want %.200q", i, a[i], b[i])
		}
	}
}

var ofTheSamples = []string{"fmt ", "JUNK", "ds64", "fact", "PEAK", "levl"}

// Everything a WAV carries comes through byte for byte, in its order, on its side of the samples, with its padding.
func TestWAVCarriesEverything(t *testing.T) {
	cue := riffChunk("cue ", u32(1)+u32(1)+u32(2)+"data"+u32(0)+u32(0)+u32(2))
	adtl := riffChunk("LIST", "adtl"+riffChunk("labl", u32(1)+"Start\x00")+riffChunk("note", u32(1)+"odd\x00")+riffChunk("ltxt", u32(1)+u32(3)+"rgn "+u64(0)))
	info := riffChunk("LIST", "INFO"+riffChunk("INAM", "Name\x00")+riffChunk("ISFT", "A recorder\x00"))
	cart := riffChunk("cart", "0101"+strings.Repeat("x", 676)+u32(32768)+"AUDs"+u32(1)+"SEGe"+u32(99)+strings.Repeat("\x00", 1360)+"tag")
	smpl := riffChunk("smpl", strings.Repeat("\x01\x00\x00\x00", 9+6))
	ixml := riffChunk("iXML", "<?xml version=\"1.0\"?><BWFXML><SCENE>1,5</SCENE></BWFXML>")
	axml := riffChunk("axml", "<ebuCoreMain><audioProgramme/></ebuCoreMain>")
	rest := []string{riffChunk("bxml", "\x1F\x8B..."), riffChunk("chna", "\x01\x00\x01\x00"), riffChunk("id3 ", "ID3\x04\x00\x00\x00\x00\x00\x00x"),
		riffChunk("_PMX", "<x:xmpmeta/>"), riffChunk("inst", "\x3C\x00\x00\x00\x7F\x00\x7F"), riffChunk("Zz09", "what is this"), riffChunk("    ", "")}
	format, data := plainFmt(3, 1, 48000, 32, 4)+riffChunk("fact", u32(5)), riffChunk("data", strings.Repeat("\x00", 20))
	for name, file := range map[string][]byte{
		"most in front": riffFile(append(append([]string{riffChunk("JUNK", "filler"), cart, format, cue, adtl, info, smpl}, rest...), data, ixml, axml)...),
		"most behind":   riffFile(append([]string{format, riffChunk("PEAK", "stale"), riffChunk("levl", "stale"), data, cart, cue, adtl, info, smpl, ixml, axml, info}, rest...)...),
		"RF64":          []byte("RF64\xFF\xFF\xFF\xFFWAVE" + riffChunk("ds64", u64(uint64(4+36+len(format+cart+info)+28))+u64(20)+u64(5)+u32(0)) + format + cart + "data\xFF\xFF\xFF\xFF" + strings.Repeat("\x00", 20) + info),
	} {
		t.Run(name, func(t *testing.T) {
			source, path := save(t, "a.wav", file), t.TempDir()+"/b.wav"
			for _, depth := range []int{16, 24} { // of three frames, 24 bits need padding
				spec := wavSpec(depth, false)
				spec.Format, spec.TagsFrom, spec.History = audio.Format{Rate: 48000, Layout: audio.Mono}, source, "x"
				write(t, withoutFFmpeg(), path, spec, programme(1, 3, 16, 0.5))
				sameChunks(t, path, source, ofTheSamples...)
			}
		})
	}
}

// What is torn behind the samples is carried as far as it goes, with the length it has.
func TestWAVCarriesATornChunk(t *testing.T) {
	whole := riffFile(plainFmt(1, 1, 8000, 16, 2), riffChunk("data", "1234"), riffChunk("iXML", "<BWFXML>"))
	source, path := save(t, "a.wav", whole[:len(whole)-3]), t.TempDir()+"/b.wav"
	spec := wavSpec(16, false)
	spec.Format, spec.TagsFrom = audio.Format{Rate: 8000, Layout: audio.Mono}, source
	write(t, withoutFFmpeg(), path, spec, programme(1, 3, 16, 0.5))
	if got := dump(t, path, ofTheSamples...); len(got) != 2 || got[1] != [2]string{"iXML", "3c42574658"} {
		t.Errorf("%q", got)
	}
}

// What states a loudness is blanked out of XML, and nothing else: spaces keep every byte's place.
func TestStaleXML(t *testing.T) {
	blank := func(s string) string { return strings.Repeat(" ", len(s)) }
	metadata := "<loudnessMetadata loudnessMethod=\"ITU-R BS.1770\">\n<integratedLoudness>-23.0</integratedLoudness></loudnessMetadata>"
	for _, test := range []struct{ in, out string }{
		{"<a>" + metadata + "<b/>" + metadata + "</a>", "<a>" + blank(metadata) + "<b/>" + blank(metadata) + "</a>"},
		{"<adm:loudnessMetadata a=\"/\"/><c/></adm:loudnessMetadata>", blank("<adm:loudnessMetadata a=\"/\"/>") + "<c/></adm:loudnessMetadata>"},
		{"<BEXT><BWF_LOUDNESS_VALUE>-2300</BWF_LOUDNESS_VALUE><BWF_UMID>0</BWF_UMID></BEXT>", "<BEXT>" + blank("<BWF_LOUDNESS_VALUE>-2300</BWF_LOUDNESS_VALUE>") + "<BWF_UMID>0</BWF_UMID></BEXT>"},
		{"<LOUDNESS><LOUDNESS_VALUE>-23</LOUDNESS_VALUE></LOUDNESS>x", blank("<LOUDNESS><LOUDNESS_VALUE>-23</LOUDNESS_VALUE></LOUDNESS>") + "x"},
		{"<loudnessMetadata>never closed", "<loudnessMetadata>never closed"},
		{"<a b=\"<\"/> loudnessMetadata</loudnessMetadata>", "<a b=\"<\"/> loudnessMetadata</loudnessMetadata>"},
		{"loudnessMetadata", "loudnessMetadata"}, {"<loudnessMetadata", "<loudnessMetadata"}, {"<LOUDNESS>", "<LOUDNESS>"},
		{"<loudnessMetadataX></loudnessMetadataX>", "<loudnessMetadataX></loudnessMetadataX>"},
	} {
		if got := string(mendXML([]byte(test.in), nil, Spec{})); got != test.out {
			t.Errorf("%q\nbecame %q\nwant   %q", test.in, got, test.out)
		}
	}
}

// Elements that never end, among others that do, take no more than a moment.
func TestStaleXMLIsQuick(t *testing.T) {
	b := []byte(strings.Repeat("<LOUDNESS><loudnessMetadata/></", 1<<20))
	start := time.Now()
	mendXML(b, nil, Spec{})
	if took := time.Since(start); took > 10*time.Second || strings.Contains(string(b), "loudnessMetadata") {
		t.Errorf("it took %v", took)
	}
}

// The level reference of cart is the sample value of 0 dB (AES46): where it is full scale, it follows the word length.
func TestCartLevelReference(t *testing.T) {
	for _, test := range []struct {
		from, to int
		float    bool
		in, out  int64
	}{
		{16, 16, false, 32768, 32768}, {16, 24, false, 32768, 8388608}, {24, 16, false, 8388608, 32768},
		{24, 16, false, 32768, 32768}, {16, 24, false, 3276, 3276}, {16, 32, false, 32768, 32768}, {24, 32, true, 8388608, 8388608},
	} {
		body := func(reference int64) string {
			return strings.Repeat("c", 680) + u32(reference) + strings.Repeat("t", 1364)
		}
		src := &tagSource{wav: &wavHeader{depth: test.from}}
		if got := string(mendCart([]byte(body(test.in)), src, wavSpec(test.to, test.float))); got != body(test.out) {
			t.Errorf("%d to %d bits: %d became %d, want %d", test.from, test.to, test.in, le32([]byte(got[680:])), test.out)
		}
	}
	if got := string(mendCart([]byte("short"), &tagSource{wav: &wavHeader{}}, wavSpec(24, false))); got != "short" {
		t.Errorf("short became %q", got)
	}
}

var nothingKnown = Loudness{
	Integrated: audio.LUFS(math.NaN()), Range: audio.LU(math.NaN()), TruePeak: audio.DBTP(math.NaN()),
	MaxMomentary: audio.LUFS(math.NaN()), MaxShort: audio.LUFS(math.NaN()),
}
