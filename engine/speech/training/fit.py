"""Fits the coefficients of weights.go: run  python3 fit.py DIRECTORY  in this folder (Debian's python3-numpy and
python3-scipy, FFmpeg, apt-get, Go). The directory keeps what is fetched, some 2 GB; sounds.py says what that is.

Clean speech, music, effects and noises are joined by mixes of them, since speech over music is only found by what
has heard some. A mix is speech where the voice is as loud as what is under it or louder (0 to 25 dB), and is not
where it is 12 dB or more below it. Far and narrow-band voices and music ducked by its beat are made from the rest.

The classifier averages the log-odds of NETWORKS networks with one hidden layer of tanh units over the standardised
features, each fitted by L-BFGS on the cross entropy with weight decay, from a fixed seed. Each kind of sound has a
fixed weight however long it is. Printed is first how well every package is judged by coefficients that were fitted
without it (single windows, no smoothing over time; one network, to save time), then weights.go is written.
"""

import os
import subprocess
import sys

import numpy as np
from scipy.optimize import minimize
from scipy.signal import butter, fftconvolve, sosfilt

import sounds
from sounds import RATE

HIDDEN = 12  # of each of NETWORKS, whose log-odds are averaged
NETWORKS = 3
DECAY = 1e-3
HOP = 3  # every how many steps a window is taken; neighbours are nearly the same


def cut(x, seconds, r):
    at = r.integers(0, max(1, len(x) - seconds * RATE))
    return x[at:at + seconds * RATE]


def in_a_room(x, r):
    """As from a far seat: a reverberation of 0.3 to 1.2 s, 0 to 8 dB below the voice or above it, and hiss."""
    n = int(RATE * 1.5)
    tail = r.normal(size=n) * np.exp(-6.9 * np.arange(n) / RATE / r.uniform(0.3, 1.2))
    tail[:int(0.01 * RATE)] = 0
    wet = fftconvolve(x, tail)[:len(x)]
    y = x / sounds.rms(x) + wet / sounds.rms(wet) * 10 ** (r.uniform(-8, 3) / 20)
    hiss = r.normal(size=len(x))
    hiss[1:] += r.uniform(0, 0.9) * hiss[:-1]
    return 0.05 * (y + hiss / hiss.std() * 10 ** (-r.uniform(12, 35) / 20))


def pumping(x, r):
    """Ducked by every beat, as dance music is."""
    beat = (np.arange(len(x)) / RATE * r.uniform(100, 145) / 60) % 1
    return x * 10 ** (-r.uniform(6, 25) * np.clip(1 - beat / r.uniform(0.3, 0.9), 0, 1) / 20)


def items(collected):
    """Yields (kind, packages, is it speech, sound)."""
    r = np.random.default_rng(1)
    speech, music = collected["speech"], collected["music"]
    for kind in collected:
        for package, x in collected[kind].values():
            yield kind, {package}, kind == "speech", x
    for package, x in speech.values():
        yield "speech in a room", {package}, True, in_a_room(cut(x, 60, r), r)
        low, high = r.uniform(100, 350), r.uniform(2500, 3500)
        narrow = butter(2, [low, high], "band", fs=RATE, output="sos")
        yield "speech in a narrow band", {package}, True, sosfilt(narrow, cut(x, 30, r))
    for package, x in music.values():
        yield "music that pumps", {package}, False, pumping(cut(x, 60, r), r)
    noisy = [*collected["noise"].values(), *collected["effects"].values()]
    under = [("music", list(music.values())), ("noise", noisy)]
    for package, x in speech.values():
        for kind, beds in under:
            for decibels in 4 * [-20, -12, 0, 0, 3, 6, 10, 15, 20] if kind == "music" else 3 * [5, 10, 15, 25]:
                bed_package, bed = beds[r.integers(len(beds))]
                a, b = cut(x, 30, r), cut(bed, 30, r)
                n = min(len(a), len(b))
                mix = a[:n] + b[:n] * (sounds.rms(a) / max(1e-9, sounds.rms(b)) * 10 ** (-decibels / 20))
                yield f"speech {decibels} dB over {kind}", {package, bed_package}, decibels >= 0, mix


def features(collected, where):
    """Returns [(kind, packages, is it speech, features of its windows)]."""
    every, paths = [], []
    for i, (kind, packages, is_speech, x) in enumerate(items(collected)):
        paths.append(os.path.join(where, f"{i}.f32"))
        x.astype("<f4").tofile(paths[-1])
        every.append((kind, packages, is_speech))
    subprocess.run(["go", "run", "features.go", *paths], check=True)
    out = []
    for path, (kind, packages, is_speech) in zip(paths, every):
        samples = os.path.getsize(path) // 4
        raw = np.fromfile(path + ".features", "<f4").reshape((samples * 10 + RATE - 1) // RATE, -1)
        x = raw[(raw[:, 0] > 0) & raw[:, 1:].any(1), 1:][::HOP]
        out.append((kind, packages, is_speech, x.astype(float)))
        os.remove(path)
        os.remove(path + ".features")
    return out


def family(kind):
    if kind in ("speech in a room", "speech in a narrow band"):
        return "speech, worse"
    if "over music" in kind:
        return "music over speech" if " -" in kind else "speech over music"
    return "speech over noise" if "over noise" in kind else kind


def fit(data, rounds=250, networks=NETWORKS):
    x = np.concatenate([d[3] for d in data])
    y = np.concatenate([np.full(len(d[3]), float(d[2])) for d in data])
    share = {"speech": 1, "speech over music": 1, "speech over noise": 0.5, "speech, worse": 0.7, "music": 2.5,
             "music that pumps": 0.5, "music over speech": 0.25, "effects": 0.25, "noise": 0.25}
    total = {}
    for d in data:
        total[family(d[0])] = total.get(family(d[0]), 0) + len(d[3])
    weight = np.concatenate([np.full(len(d[3]), share[family(d[0])] / total[family(d[0])]) for d in data])
    weight /= weight.sum()
    centre, scale = x.mean(0), x.std(0) + 1e-6
    z = np.hstack([(x - centre) / scale, np.ones((len(x), 1))])
    n, hidden = z.shape[1], HIDDEN
    def loss(p):
        first, second = p[:n * hidden].reshape(n, hidden), p[n * hidden:]
        h = np.tanh(z @ first)
        odds = h @ second[:-1] + second[-1]
        value = weight @ (np.logaddexp(0, odds) - y * odds) + DECAY * (p @ p) / 2
        slope = weight * (1 / (1 + np.exp(-odds)) - y)
        back = np.outer(slope, second[:-1]) * (1 - h * h)
        return value, np.concatenate([(z.T @ back).ravel(), h.T @ slope, [slope.sum()]]) + DECAY * p

    firsts, seconds, always = [], [], 0
    for seed in range(networks):
        r = np.random.default_rng(seed)
        start = np.concatenate([r.normal(size=n * hidden) / n ** 0.5, r.normal(size=hidden + 1) / hidden ** 0.5])
        p = minimize(loss, start, jac=True, method="L-BFGS-B", options={"maxiter": rounds}).x
        firsts.append(p[:n * hidden].reshape(n, hidden))
        seconds.append(p[n * hidden:-1] / networks)
        always += p[-1] / networks
    first = np.hstack(firsts)
    first = np.vstack([first[:-1] / scale[:, None], first[-1] - centre / scale @ first[:-1]])
    return first, np.concatenate([*seconds, [always]])


def odds(model, x):
    first, second = model
    return np.tanh(x @ first[:-1] + first[-1]) @ second[:-1] + second[-1]


def right(model, d):
    return ((odds(model, d[3]) > 0) == d[2]).mean() if len(d[3]) else np.nan


def mean(parts):
    return np.average([share for share, _ in parts], weights=[n for _, n in parts])


def leave_one_out(data):
    """Prints the share of windows judged rightly, each package by coefficients fitted without it."""
    packages = sorted({p for d in data for p in d[1]})
    tally = {}
    for package in packages:
        model = fit([(*d[:3], d[3][::4]) for d in data if package not in d[1]], 120, 1)
        line = {}
        for d in data:
            if package in d[1] and len(d[3]):
                line.setdefault(d[0], []).append((right(model, d), len(d[3])))
        for kind, parts in line.items():
            tally.setdefault(kind, []).extend(parts)
        clean = " ".join(f"{k} {mean(v):.3f} ({sum(n for _, n in v) * HOP / 600:.0f} min)" for k, v in line.items()
                         if k in ("speech", "music", "effects", "noise"))
        print(f"without {package:32} {clean}", flush=True)
    for kind in sorted(tally):
        print(f"{kind:32} {mean(tally[kind]):.3f}")


def write(model, data, path):
    first, second = model
    packages = sorted({p for d in data for p in d[1]} - {"made here"})
    with open(path, "w") as f:
        f.write("// Code generated by training/fit.py; DO NOT EDIT.\n\npackage speech\n\n")
        f.write("// The coefficients were fitted on recordings from the Debian packages\n")
        f.write("".join(f"// {p},\n" for p in packages) + "// and on noises.\n\n")
        f.write(f"const hiddenUnits = {first.shape[1]}\n\n")
        f.write("// hidden holds, for each feature and then for none, what it adds to each hidden unit.\n")
        f.write("var hidden = [featureCount + 1][hiddenUnits]float64{\n")
        f.write("".join("\t{" + ", ".join(f"{v:.5g}" for v in row) + "},\n" for row in first) + "}\n\n")
        f.write("// outer holds what each hidden unit adds to the log-odds, then what is added always.\n")
        f.write("var outer = [hiddenUnits + 1]float64{" + ", ".join(f"{v:.5g}" for v in second) + "}\n")
    subprocess.run(["gofmt", "-w", path], check=True)


if __name__ == "__main__":
    data = features(sounds.collect(sys.argv[1]), sys.argv[1])
    leave_one_out(data)
    model = fit(data)
    write(model, data, os.path.join("..", "weights.go"))
