"""The sounds the coefficients of weights.go are fitted on: recordings out of Debian packages, noises made here.

No sound is kept with the project. collect() fetches the packages with apt-get download, unpacks them (nothing is
installed), decodes with FFmpeg to 16 kHz mono, and keeps one array per source. The recordings of
pocketsphinx-testdata and asc-music are left out: the tests of the package judge by them.
"""

import concurrent.futures
import glob
import os
import random
import subprocess
import zipfile

import numpy as np

RATE = 16000

# source: (package, pattern below the package's root, minutes). A source is what is left out as one in
# leave-one-package-out, together with the others of its package.
SPEECH = {
    "english prompts": ("asterisk-core-sounds-en-g722", "**/*.g722", 10),
    "spanish prompts": ("asterisk-core-sounds-es-g722", "**/*.g722", 10),
    "french prompts": ("asterisk-core-sounds-fr-g722", "**/*.g722", 10),
    "italian prompts": ("asterisk-core-sounds-it-g722", "**/*.g722", 10),
    "russian prompts": ("asterisk-core-sounds-ru-g722", "**/*.g722", 6),
    "colombian prompts": ("asterisk-prompt-es-co", "**/*.gsm", 4),
    "armelle's prompts": ("asterisk-prompt-fr-armelle", "**/*.gsm", 4),
    "czech dialogue": ("fillets-ng-data-cs", "**/cs/*-[mv]-*.ogg", 10),
    "dutch dialogue": ("fillets-ng-data-nl", "**/nl/*-[mv]-*.ogg", 10),
    "stamps, romance": ("tuxpaint-stamps-default", "**/*_desc_[efcr][sroa].ogg", 5),
    "stamps, others": ("tuxpaint-stamps-default", "**/*_desc_[bedn]*.ogg", 4),
    "ktuberling": ("ktuberling-data", "**/sounds/*/*.ogg", 4),
    "war room": ("warzone2100-data", "un/audio/tutorial/*", 4),
    "hedgehogs": ("hedgewars-data", "**/voices/[BDHMPR]*/*.ogg", 5),
}
MUSIC = {
    "wesnoth": ("wesnoth-1.16-music", "**/*.ogg", 25),
    "warzone": ("warzone2100-music", "**/*.o*", 15),
    "singularity": ("singularity-music", "**/*.ogg", 12),
    "nexuiz": ("nexuiz-music", "un/**/*.ogg", 15),
    "muldjord": ("fretsonfire-songs-muldjord", "**/song.ogg", 8),
    "sectoid": ("fretsonfire-songs-sectoid", "**/song.ogg", 8),
    "guitars": ("fretsonfire-songs-sectoid", "**/guitar.ogg", 4),
    "drascula": ("drascula-music", "**/*.ogg", 15),
    "fillets": ("fillets-ng-data", "**/music/*.ogg", 12),
    "hedgewars": ("hedgewars-data", "**/Music/*.ogg", 15),
    "supertux": ("supertux-data", "**/music/**/*.ogg", 15),
    "lincity": ("lincity-ng-data", "**/music/**/*.ogg", 10),
    "frozen bubble": ("frozen-bubble-data", "**/*.ogg", 8),
    "tux racer": ("extremetuxracer-data", "**/music/*.ogg", 8),
    "colobot": ("colobot-common-sounds", "**/music/*.ogg", 15),
    "marsshooter": ("marsshooter-data", "**/music/*", 10),
    "xmoto": ("xmoto-data", "**/*.ogg", 8),
    "warmux": ("warmux-data", "**/music/**/*.ogg", 12),
    "lordsawar": ("lordsawar-data", "**/music/*.ogg", 8),
    "zaz": ("zaz-data", "**/*.ogg", 8),
    "pushover": ("pushover-data", "**/*.ogg", 10),
    "starfighter": ("starfighter-data", "**/music/*.ogg", 10),
    "openclonk": ("openclonk-data", "**/Music.ocg/*.ogg", 8),
    "berusky": ("berusky2-data", "**/music/*.ogg", 12),
    "horizons": ("unknown-horizons", "**/music/**/*.ogg", 12),
    "freedroid": ("freedroidrpg-data", "**/music/*.ogg", 12),
    "glest": ("megaglest-data", "**/music/*.ogg", 8),
}
EFFECTS = {
    "city": ("lincity-ng-data", "**/sounds/*.wav", 4),
    "tux": ("supertux-data", "**/sounds/*", 3),
    "arena": ("openarena-data", "un/sound/[iw]*/**/*.wav", 4),
    "nature": ("megaglest-data", "**/tilesets/*/sounds/*.ogg", 8),
    "robots": ("colobot-common-sounds", "**/sounds/*.wav", 4),
}


def unpacked(package, where):
    """Fetches and unpacks a package once, also the archives games keep their sounds in."""
    root = os.path.join(where, package)
    if not os.path.isdir(root):
        os.makedirs(root)
        subprocess.run(["apt-get", "download", "-q", package], cwd=root, check=True)
        deb = glob.glob(root + "/*.deb")[0]
        subprocess.run(["dpkg-deb", "-x", deb, root], check=True)
        os.remove(deb)
        for path in glob.glob(root + "/**/*.pk3", recursive=True) + glob.glob(root + "/**/*.wz", recursive=True):
            with zipfile.ZipFile(path) as z:
                z.extractall(root + "/un", [n for n in z.namelist() if n.endswith((".ogg", ".wav", ".opus"))])
    return root


def decoded(path, seconds):
    out = subprocess.run(["ffmpeg", "-v", "error", "-t", str(seconds), "-i", path, "-map", "0:a:0",
                          "-f", "f32le", "-ar", str(RATE), "-ac", "1", "-"], capture_output=True).stdout
    return np.frombuffer(out, np.float32)


def rms(x):
    """The rms of what is heard: tenths of a second within 30 dB of the loudest."""
    blocks = np.square(x[:len(x) // 1600 * 1600].reshape(-1, 1600).astype(float)).mean(1)
    return np.sqrt(blocks[blocks > blocks.max(initial=0) * 1e-3].mean()) if len(blocks) else 0.0


def gathered(source, where, kind):
    package, pattern, minutes = source
    root = unpacked(package, where)
    draw = random.Random(package + pattern)
    paths = sorted(p for p in glob.glob(os.path.join(root, pattern), recursive=True) if os.path.isfile(p))
    draw.shuffle(paths)
    noise = np.random.default_rng(len(paths))
    parts, total = [], 0
    excerpt = max(40, 60 * minutes / max(1, len(paths)))
    length, shortest = (excerpt, 8) if kind == "music" else (20, 0.1)
    with concurrent.futures.ThreadPoolExecutor(3) as pool:
        decodings = [pool.submit(decoded, path, length) for path in paths]
        for decoding in decodings:
            x = decoding.result()
            level = rms(x)
            if len(x) < shortest * RATE or level == 0:
                continue
            x = x * (10 ** ((-23 + draw.uniform(-4, 4)) / 20) / level)
            gap = np.zeros(int(RATE * (draw.uniform(0.05, 0.5) if kind == "speech" else 0.3)), np.float32)
            x = np.concatenate([x, gap])
            parts.append(x + noise.normal(0, 10 ** (draw.uniform(-90, -60) / 20), len(x)))
            total += len(x)
            if total >= minutes * 60 * RATE:
                pool.shutdown(cancel_futures=True)
                break
    return np.concatenate(parts).astype(np.float32)


def noises():
    """Twelve minutes of noises: white, pink, brown, hum, rain-like, applause-like, engines, beeps and tones."""
    r = np.random.default_rng(7)
    n = 60 * RATE
    t = np.arange(n) / RATE

    def coloured(slope):
        spectrum = np.fft.rfft(r.normal(size=n))
        f = np.maximum(np.fft.rfftfreq(n, 1 / RATE), 20)
        return np.fft.irfft(spectrum * f ** slope, n)

    def slow(x, hz, depth):
        """Breathes: as wind and crowds do."""
        walk = np.interp(t, np.arange(0, 61, 1 / hz), r.normal(size=len(np.arange(0, 61, 1 / hz))))
        return x * np.exp(depth * walk)

    def claps(rate):
        x = np.zeros(n)
        for at in (r.uniform(0, n - 800, int(60 * rate))).astype(int):
            x[at:at + 400] += r.normal(size=400) * np.exp(-np.arange(400) / r.uniform(30, 90)) * r.uniform(0.2, 1)
        return x

    hum = sum(np.sin(2 * np.pi * 50 * k * t + k) / k for k in (1, 2, 3, 5, 7))
    turned = 2 * np.pi * np.cumsum(40 + 15 * np.sin(2 * np.pi * 0.1 * t)) / RATE
    engine = sum(np.sin(k * turned) / k for k in range(1, 25))
    beeps = np.sin(2 * np.pi * 1000 * t) * (t % 1 < 0.2)
    sweep = np.sin(2 * np.pi * np.cumsum(200 + 3000 * (t % 7) / 7) / RATE)
    all_of_them = [coloured(0), coloured(-0.5), coloured(-1), hum, hum + 3 * coloured(-0.5),
                   slow(coloured(-0.5), 1, 0.5), slow(coloured(-1), 0.5, 0.8), claps(300), claps(40), engine, beeps, sweep]
    return np.concatenate([x * 0.05 / rms(x) for x in all_of_them]).astype(np.float32)


def collect(where):
    """Returns {kind: {source: (package, sound)}}; decoded sounds are kept below where as .npy."""
    sounds = {}
    for kind, table in (("speech", SPEECH), ("music", MUSIC), ("effects", EFFECTS)):
        sounds[kind] = {}
        for name, source in table.items():
            kept = os.path.join(where, f"{kind} {name}.npy")
            if not os.path.exists(kept):
                np.save(kept, gathered(source, where, kind))
            sounds[kind][name] = (source[0], np.load(kept))
    sounds["noise"] = {"noises": ("made here", noises())}
    return sounds


if __name__ == "__main__":
    import sys
    for kind, sources in collect(sys.argv[1]).items():
        for name, (package, x) in sources.items():
            print(f"{kind:8} {name:20} {package:32} {len(x) / RATE / 60:5.1f} min")
