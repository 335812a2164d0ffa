package demo

// The repertoire of the invented station: every tempo, key and line-up another. Patterns have one
// character a step; see song.

func anthem(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 128, beats: 4, root: 40, minor: true, chords: []int{0, 5, 2, 6}, bars: bars,
		kick: "x...x...x...x...", snare: "....x.......x..o", hat: "o.x.o.x.o.x.o.x.",
		bass: "x.xxx.xxx.xxx.xx", comp: "x..x..x...x..x..", lead: "x..x..x.x...x.x.",
		low: synthBass, mid: stab, top: brass, hall: 0.5, wet: 0.08,
	}
}

func strut(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 104, beats: 4, root: 43, chords: []int{0, 3, 0, 4}, bars: bars, swing: 0.12,
		kick: "x.....x.x..o....", snare: "....x..o.o..x...", hat: "xoxoxoxoxoxoxoxo",
		bass: "x..xo.x.x..x.ox.", comp: "..x...x...x...x.", lead: "x.x..x..x..x....",
		low: bassGuitar, mid: organ, top: reed, hall: 0.4, wet: 0.06,
	}
}

func offbeat(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 76, beats: 4, root: 45, minor: true, chords: []int{0, 0, 3, 4}, bars: bars,
		kick: "....x.......x...", snare: "....x.......x...", hat: "o.x.o.x.o.x.o.xo",
		bass: "x..x.x....x.x...", comp: "..x...x...x...x.", lead: "..x.x...x.......",
		low: bassGuitar, mid: organ, top: reed, hall: 1.2, wet: 0.12,
	}
}

func march(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 116, beats: 2, root: 41, chords: []int{0, 4, 0, 3, 0, 1, 4, 0}, bars: bars,
		kick: "x.x.", snare: "oxoxxxox", hat: ".x.x",
		bass: "x.x.", comp: ".x.x", lead: "x.xxx.x.",
		low: brass, mid: brass, top: brass, hall: 0.8, wet: 0.1,
	}
}

func ballad(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 66, beats: 4, root: 38, chords: []int{0, 5, 3, 4}, bars: bars, build: true,
		kick: "x.......o.......", brush: "..o...x...o...x.",
		bass: "x.....o.x.......", comp: "x...............", lead: "x...x.x.x.......",
		low: bassGuitar, mid: pad, top: reed, hall: 1.8, wet: 0.2,
	}
}

func waltz(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 152, beats: 3, root: 43, chords: []int{0, 0, 4, 4, 1, 4, 0, 0}, bars: bars,
		brush: ".xx",
		bass:  "x..", comp: ".xx", lead: "x.xx.x",
		low: bassGuitar, mid: reed, top: reed, hall: 0.7, wet: 0.12,
	}
}

func blues(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 84, beats: 4, root: 40, minor: true, chords: []int{0, 0, 3, 0, 4, 3, 0, 4}, bars: bars, swing: 0.33,
		kick: "x...o...", brush: "..x...x.", hat: "xoxoxoxo",
		bass: "x.x.x.x.", comp: "x..o....", lead: "xox.x..x",
		low: bassGuitar, mid: organ, pluckedLead: true, hall: 0.6, wet: 0.1,
	}
}

func campfire(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 92, beats: 4, root: 43, chords: []int{0, 4, 5, 3}, bars: bars,
		comp: "x..oo.o.", lead: "x...x.o.",
		pluckedComp: true, pluckedLead: true, hall: 0.5, wet: 0.08,
	}
}

func lullaby(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 88, beats: 3, root: 43, chords: []int{0, 3, 4, 0}, bars: bars,
		comp: "x..", lead: "x.xo.o", mid: pad, chimes: true, hall: 1.5, wet: 0.18,
	}
}

func gallop(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 164, beats: 4, root: 38, minor: true, chords: []int{0, 6, 5, 4}, bars: bars,
		kick: "x.xxx.xxx.xxx.xx", snare: "....x.......x...", hat: "x.x.x.x.x.x.x.x.",
		bass: "x.xxx.xxx.xxx.xx", comp: "x.......x.......", lead: "x.x.xxx.x.x.xxx.",
		low: synthBass, mid: stab, top: stab, hall: 0.4, wet: 0.05,
	}
}

func drift(name string, rate, bars int) song {
	return song{
		name: name, rate: rate, tempo: 98, beats: 4, root: 36, minor: true, chords: []int{0, 2, 5, 3}, bars: bars, build: true,
		kick: "x...x...x...x...", hat: "..o...o...o...o.",
		bass: "x...............", comp: "x...............", lead: "x..x..x..x..x.x.",
		low: synthBass, mid: pad, chimes: true, hall: 2.2, wet: 0.25,
	}
}
