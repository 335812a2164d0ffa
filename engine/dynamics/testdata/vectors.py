#!/usr/bin/python3
"""Makes vectors.json: what the parts of engine/dynamics should give, by numpy and scipy alone:

    /usr/bin/python3 vectors.py > vectors.json

The same sound is made here and in the test from whole numbers, so that only results are stored.
"""
import json
import sys

import numpy as np
from scipy.ndimage import maximum_filter1d
from scipy.signal import bilinear_zpk, sosfilt, sosfreqz, zpk2sos


def noise(seed, n):
    """Uniform in [-1, 1): a linear congruential generator modulo 2^32, its upper 16 bits."""
    out, s = np.empty(n), seed
    for i in range(n):
        s = (1664525 * s + 1013904223) % 2**32
        out[i] = (s >> 16) / 32768 - 1
    return out


def sound(rate, channels, n):
    """Noise under steps of level, every 50 ms another one."""
    steps = np.array([0.02, 0.5, 0.9, 0.05, 0.3, 0.01, 0.7, 0.7])
    level = steps[(np.arange(n) * 20 // rate) % len(steps)]
    return np.stack([noise(c + 1, n) * level for c in range(channels)]).astype(np.float32)


def gain_computer(x, t, r, w):
    """y(x) - x of Giannoulis, Massberg, Reiss, J. Audio Eng. Soc. 60(6), 2012."""
    x = np.asarray(x, dtype=float)
    y = np.where(2 * (x - t) < -w, x, t + (x - t) / r)
    if w > 0:
        y = np.where(2 * abs(x - t) <= w, x + (1 / r - 1) * (x - t + w / 2) ** 2 / (2 * w), y)
    return y - x


def weighted(x, rate):
    """A shelf of +4 dB with its pole at 2778 Hz and a double high-pass at 38.135 Hz, bilinear, prewarped; 0.691 dB at 997 Hz."""
    def warp(hz):
        return 2 * rate * np.tan(np.pi * min(hz / rate, 0.49))
    lift, h, k = 1.585, warp(2778.0), warp(38.135)
    z, p, g = bilinear_zpk([-h / lift, 0, 0], [-h, -k, -k], lift, rate)
    sos = zpk2sos(z, p, g)
    _, response = sosfreqz(sos, [2 * np.pi * 997 / rate])
    return sosfilt(sos, x) * 10 ** (0.691 / 20) / abs(response[0])


def spline(t):
    """Three boxes of 2 ms, convolved: t in ms, area 1."""
    t = abs(t)
    return np.where(t <= 1, 3 / 8 - t**2 / 8, np.where(t <= 3, (3 - t) ** 2 / 16, 0))


def compressor(x, rate, share, t, r, w, release):
    """Gain in dB of every frame."""
    n = x.shape[1]
    ms = n * 1000 // rate + 40
    padded = np.pad(x.astype(float), ((0, 0), (0, rate // 5)))
    power = sum(s * weighted(c, rate) ** 2 for c, s in zip(padded, share))
    time = np.arange(len(power)) * 1000 / rate
    level = np.empty(ms)
    for k in range(ms):
        near = np.flatnonzero(abs(time - k) <= 3)
        level[k] = (power[near] * spline(time[near] - k)).sum() * 1000 / rate
    wanted = -gain_computer(-0.691 + 10 * np.log10(np.maximum(level, 1e-30)), t, r, w)
    before = 40  # what is before the start is silent
    wanted = np.pad(wanted, (before, 40))
    held = maximum_filter1d(wanted, 21, mode="constant")
    alpha, last = np.exp(-1 / (1000 * release)), 0.0
    released = np.empty_like(held)
    for k, h in enumerate(held):
        last = max(h, h + alpha * (last - h))
        if last < 1e-5:
            last = 0.0
        released[k] = last
    smooth = np.convolve(np.convolve(released, np.ones(11) / 11, "same"), np.ones(11) / 11, "same")
    return -np.interp(np.arange(n) * 1000 / rate, np.arange(len(smooth)) - before, smooth)


def stage(x, limit, rate, look, hold, release):
    """Gain of every frame of one stage of the ceiling that follows the samples themselves."""
    n, half, held = len(x), round(look * rate), round(hold * rate)
    pad = 4 * (half + held) + 10
    p = np.pad(abs(x.astype(float)), pad)
    p = np.maximum(p, np.append(p[1:], 0))  # between frames i and i+1
    need = np.where(p > limit, 1 - limit / np.maximum(p, 1e-9), 0)
    ahead, behind = half + 1, half + 1 + held
    size = ahead + behind + 1
    # maximum_filter1d's window is centred: from size//2 before to size-1-size//2 after
    h = maximum_filter1d(need, size, mode="constant", origin=behind - size // 2)
    alpha, last, r = np.exp(-1 / (release * rate)), 0.0, np.empty_like(h)
    for i, v in enumerate(h):
        last = max(v, alpha * last)
        r[i] = last
    box = np.ones(half + 1) / (half + 1)
    return (1 - np.convolve(r, np.convolve(box, box), "same"))[pad:pad + n]


def main():
    levels = [-80, -26.5, -23.0, -22.9, -21, -20, -18.5, -17.1, -17, -10, 0, 12]
    curves = [[-20, 3, 6], [-20, 1, 6], [-20, 20, 0], [-14.5, 2, 8], [-30, 1e9, 12]]
    compressors = []
    for rate, channels, share, t, r, w, release in [
            (8000, 1, [1], -20, 3, 6, 0.08), (44100, 2, [1, 1], -14, 4, 8, 0.15), (11025, 2, [1, 1], -25, 2, 0, 0.03),
            (48000, 6, [1, 1, 1, 0, 1.41, 1.41], -18, 3, 6, 0.15)]:
        n = rate * 2 // 5
        g = compressor(sound(rate, channels, n), rate, share, t, r, w, release)
        at = list(range(0, n, rate // 97))
        compressors.append({"rate": rate, "channels": channels, "threshold_db": t, "ratio": r, "knee_db": w, "release_s": release,
                            "frames": n, "every": rate // 97, "gain_db": [round(g[i], 7) for i in at]})
    rate, n = 16000, 6400
    x = sound(rate, 1, n)[0]
    g = stage(x, np.float64(0.25), rate, 0.002, 0.003, 0.02)
    values = (noise(9, 60) * 10).astype(int).clip(0).tolist()
    json.dump({
        "gain_computer": [{"threshold_db": c[0], "ratio": c[1], "knee_db": c[2], "level_db": levels,
                           "gain_db": [round(v, 9) for v in gain_computer(levels, *c)]} for c in curves],
        "sliding_maximum": {"values": values, "size": 7,
                            "maxima": maximum_filter1d(values, 7, mode="constant", origin=3).tolist()},
        "compressor": compressors,
        "stage": {"rate": rate, "frames": n, "limit": 0.25, "look_s": 0.002, "hold_s": 0.003, "release_s": 0.02, "every": 37,
                  "gain": [round(v, 9) for v in g[::37]]},
    }, sys.stdout, indent=None)
    print()


main()
