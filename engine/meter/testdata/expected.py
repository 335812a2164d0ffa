#!/usr/bin/python3
"""Writes expected.json: what an independent meter, in numpy and scipy, reads of a few signals that
expected_test.go makes too, sample for sample. Nothing here is shared with the engine.

Run it with Debian's python3-numpy and python3-scipy; it takes a few seconds and 1 GB:

    /usr/bin/python3 expected.py

K-weighting: at 48 kHz scipy's sosfilt with the coefficients printed in BS.1770-5 Annex 1, Tables 1 and 2; at
other rates the printed filter's complex response, multiplied on in the frequency domain. True peaks: 64 points
a sample by zero-padding the spectrum of long tapered segments.
"""
import json
import os

import numpy as np
from scipy.signal import lfilter, sosfilt

SHELF = [1.53512485958697, -2.69169618940638, 1.19839281085285, 1.0, -1.69065929318241, 0.73248077421585]
PASS = [1.0, -2.0, 1.0, 1.0, -1.99004745483398, 0.99007225036621]


# --- signals ---------------------------------------------------------------------------------------------

def noise(seed, n):
    """A 32-bit linear congruence, its top 24 bits as -1 ... 1, through two one-pole low-passes."""
    out, state = np.empty(n), seed
    for i in range(n):
        state = (state * 1664525 + 1013904223) & 0xFFFFFFFF
        out[i] = (state >> 8) / 8388608.0 - 1
    for _ in range(2):
        out = lfilter([0.25], [1, -0.75], out)
    return out


def levels(rate, n, seconds, decibels):
    """A gain that takes the next of a list of values, round and round, every so many seconds."""
    which = (np.arange(n) / (seconds * rate)).astype(int) % len(decibels)
    return 10 ** (np.array(decibels, float)[which] / 20)


def sweep(rate, n):
    t, length = np.arange(n) / rate, n / rate
    phase = 2 * np.pi * 20 * length / np.log(1000) * (1000 ** (t / length) - 1)  # 20 Hz to 20 kHz
    return [0.5 * np.sin(phase), 0.25 * np.sin(phase + 1)]


def steps(rate, n):
    gain = levels(rate, n, 1.37, [0, -15, -30, -3, -45, 2, -20, -10, -60, -6, -35])
    return [gain * noise(1, n), 0.7 * gain * noise(2, n)]


def bursts(rate, n):
    t = np.arange(n) / rate
    within = np.fmod(t, 0.7)
    envelope = np.where(within < 0.3, 0.5 - 0.5 * np.cos(2 * np.pi * within / 0.3), 0)
    gain = levels(rate, n, 0.7, [0, -6, -12, -18, -24])
    return [gain * envelope * np.sin(2 * np.pi * 1234.5 * t) + 0.001 * noise(3, n)]


def surround(rate, n):
    gain = levels(rate, n, 0.9, [0, -8, -20])
    x = [g * gain * noise(10 + c, n) for c, g in enumerate([0.5, 0.4, 0.6, 0, 0.3, 0.35])]
    x[3] = 0.9 * np.sin(2 * np.pi * 50 * np.arange(n) / rate)
    return x


def tones(rate, n):
    t = np.arange(n) / rate
    swell = 0.6 + 0.4 * np.sin(2 * np.pi * 0.31 * t)
    return [swell * (0.4 * np.sin(2 * np.pi * 997 * t) + 0.2 * np.sin(2 * np.pi * 0.21 * rate * t + 0.3)),
            swell * (0.3 * np.sin(2 * np.pi * 440 * t) + 0.25 * np.sin(2 * np.pi * 0.437 * rate * t))]


SIGNALS = {  # name: maker, rate, seconds, weights
    "sweep": (sweep, 48000, 8, [1, 1]),
    "steps": (steps, 44100, 17, [1, 1]),
    "steps 48": (steps, 48000, 17, [1, 1]),
    "steps 11": (steps, 11025, 16.21, [1, 1]),
    "steps 22": (steps, 22050, 12.5, [1, 1]),
    "bursts": (bursts, 8000, 11.3, [1]),
    "bursts 16": (bursts, 16000, 9.05, [1]),
    "surround": (surround, 48000, 6.5, [1, 1, 1, 0, 1.41, 1.41]),
    "tones 32": (tones, 32000, 7, [1, 1]),
    "tones 96": (tones, 96000, 6, [1, 1]),
}


def make(maker, rate, seconds):
    """The channels as float32, with raised-cosine fades of 10 ms."""
    n, fade = round(seconds * rate), rate // 100
    i = np.arange(n)
    edge = 0.5 - 0.5 * np.cos(np.pi * np.minimum(1, np.minimum(i, n - 1 - i) / fade))
    return [(x * edge).astype(np.float32).astype(float) for x in maker(rate, n)]


# --- the meter -------------------------------------------------------------------------------------------

def weighted(x, rate):
    """x and 2 s of silence, K-weighted."""
    x = np.concatenate([x, np.zeros(2 * rate)])
    if rate == 48000:
        return sosfilt([SHELF, PASS], x)
    size = 1 << int(np.ceil(np.log2(len(x) + 2 * rate)))
    z = np.exp(-2j * np.pi * np.minimum(np.fft.rfftfreq(size, 1 / rate), 24000) / 48000)
    response = 1
    for b0, b1, b2, a0, a1, a2 in (SHELF, PASS):
        response = response * (b0 + b1 * z + b2 * z * z) / (a0 + a1 * z + a2 * z * z)
    return np.fft.irfft(np.fft.rfft(x, size) * response, size)[:len(x)]


def edge(k, rate, per_second):
    return (2 * k * rate + per_second) // (2 * per_second)  # the nearest sample


def windows(total, end, rate, per_second, width):
    """Mean power of every full window of width hops that ends by a frame."""
    out, k = [], width
    while edge(k, rate, per_second) <= end:
        a, b = edge(k - width, rate, per_second), edge(k, rate, per_second)
        out.append((total[b] - total[a]) / (b - a))
        k += 1
    return np.array(out)


def lufs(power):
    with np.errstate(divide="ignore"):
        return -0.691 + 10 * np.log10(power)


def rank(values, p):
    return np.sort(values)[int(np.floor((len(values) - 1) * p / 100 + 0.5))]


def interval_peaks(x):
    """The largest magnitude from each sample to the next, and before the first and after the last."""
    guard, core = 4096, 16384
    taper = 0.5 - 0.5 * np.cos(np.pi * (np.arange(guard) + 0.5) / guard)
    shape = np.concatenate([taper, np.ones(core), taper[::-1]])
    padded = np.concatenate([np.zeros(2 * guard), x, np.zeros(core + 2 * guard)])
    out = []
    for at in range(0, len(x) + 2 * guard, core):
        segment = padded[at:at + core + 2 * guard] * shape
        fine = 64 * np.fft.irfft(np.fft.rfft(segment), 64 * len(segment))
        out.append(np.abs(fine).reshape(-1, 64).max(axis=1)[guard:-guard])
    peaks = np.concatenate(out)  # of padded, from guard on
    return peaks[guard:guard + len(x)], max(peaks[:guard].max(), peaks[guard + len(x):].max())


def read(channels, rate, weights):
    n = len(channels[0])
    power = sum(g * weighted(x, rate) ** 2 for g, x in zip(weights, channels))
    total = np.concatenate([[0], np.cumsum(power)])
    momentary, short = windows(total, n, rate, 10, 4), windows(total, n, rate, 10, 30)
    r = {"sample_rate_hz": rate, "channels": len(channels), "frames": n}

    blocks = momentary[lufs(momentary) > -70]
    blocks = blocks[lufs(blocks) > lufs(blocks.mean()) - 10]
    r["integrated_lufs"] = lufs(blocks.mean())

    steps = n * 10 // rate
    while edge(steps, rate, 10) > n:
        steps -= 1
    followed = windows(total, edge(steps + 15, rate, 10), rate, 10, 30)
    kept = followed[lufs(followed) >= -70]
    kept = lufs(kept[lufs(kept) >= lufs(kept.mean()) - 20])
    r["loudness_range_lu"] = rank(kept, 95) - rank(kept, 10)

    r["max_momentary_lufs"] = lufs(windows(total, n, rate, 100, 40).max())
    r["max_short_term_lufs"] = lufs(windows(total, n, rate, 100, 300).max())
    sounding = lufs(short)[lufs(short) > -70]
    for p in (10, 50, 95):
        r["short_term_p%d_lufs" % p] = rank(sounding, p)

    inside, outside = zip(*(interval_peaks(x) for x in channels))
    inside = np.max(inside, axis=0)
    true_peak = 20 * np.log10(max(inside.max(), max(outside)))
    sample_peak = 20 * np.log10(np.max(np.abs(channels)))
    mean_square = np.mean(np.square(channels))
    r["true_peak_dbtp"] = true_peak
    r["sample_peak_dbfs"] = sample_peak
    r["plr_lu"] = true_peak - r["integrated_lufs"]
    r["rms_dbfs"] = 10 * np.log10(2 * mean_square)
    r["crest_factor_db"] = sample_peak - 10 * np.log10(mean_square)
    r["min_psr_lu"] = min(20 * np.log10(inside[edge(k, rate, 10):edge(k + 30, rate, 10)].max()) - s
                          for k, s in enumerate(lufs(short)) if s > -70)

    step_peaks = [np.max(np.abs([x[edge(k, rate, 10):edge(k + 1, rate, 10)] for x in channels])) for k in range(steps)]
    r["noise_floor_lufs"] = rank([m for k, m in enumerate(lufs(momentary))
                                  if min(step_peaks[k:k + 4]) >= 1e-6 and m > -120], 5)
    return {k: v if isinstance(v, int) else round(float(v), 5) for k, v in r.items()}


if __name__ == "__main__":
    table = {name: read(make(maker, rate, seconds), rate, weights)
             for name, (maker, rate, seconds, weights) in SIGNALS.items()}
    with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "expected.json"), "w") as out:
        json.dump(table, out, indent=1)
        out.write("\n")
