#!/usr/bin/python3
"""The line's signal work for one recording with numpy and scipy, as fast as these can be made to do it.

    peer.py REC.wav THROWS

Input 0 is the shaft mark, inputs 1 to 2*THROWS are pressures (head end, crank end of each throw), as many
accelerometers follow, two of each throw. Every array operation runs over a whole channel or over all turns of it at
once; there is no loop over samples or turns. Work on integers stays on integers where it can.

It does what the line does as far as the line's work can be put this way: marks; pressures through a Gaussian of half
a grid step on a 0.5° grid; a causal band-pass of each accelerometer in the impact band and in the leak band at full
rate; peak, RMS and leak-band mean square per bin; plateaus; opening crossings; early and late exponents; p dV; the
peak, the onset and the 3 ms energy inside the four windows of each end. It does not follow a machine that changes, has
no doubts, no leak fit, no rod loads, no baseline, no alarms, and stores nothing.

Prints one JSON line like the yardstick.
"""
import json
import sys
import time
import warnings

import numpy as np
from scipy import ndimage, signal
from scipy.io import wavfile

GRID = 720
BORE, STROKE, ROD, CLEAR, K = 0.22, 0.15, 0.375, 0.17, 1.3


def marks(ph):
    hi, lo = 0.6 * ph.max(), 0.4 * ph.max()
    above = ph >= hi
    up = np.flatnonzero(above[1:] & ~above[:-1])
    low = np.flatnonzero(ph < lo)                     # between two pulses the signal must have been low
    seen = np.searchsorted(low, up)
    k = up[np.append(True, np.diff(seen) > 0)]
    return k + (hi - ph[k]) / (ph[k + 1] - ph[k])


def main():
    throws = int(sys.argv[2])
    warnings.simplefilter("ignore", wavfile.WavFileWarning)
    t0 = time.perf_counter()
    rate, d = wavfile.read(sys.argv[1])
    n = len(d)
    m = marks(d[:, 0].astype(np.float64))
    turns = len(m) - 1
    grid = np.arange(GRID) / GRID
    at = (m[:-1, None] + np.diff(m)[:, None] * grid).ravel()
    edges = at.astype(np.int64)
    edges = np.append(edges, int(m[-1]))
    bins = np.diff(edges).reshape(turns, GRID)
    theta = 2 * np.pi * grid
    r = STROKE / 2
    trav = r * (1 - np.cos(theta)) + ROD * (1 - np.sqrt(1 - (r / ROD * np.sin(theta)) ** 2))
    area = np.pi / 4 * BORE ** 2
    perturn = (m[-1] - m[0]) / turns
    out, opens = {}, []
    for c in range(1, 1 + 2 * throws):
        end = (c - 1) % 2
        vol = area * ((trav if end == 0 else STROKE - trav) + CLEAR * STROKE)
        lv, dv = np.log(vol), np.gradient(vol)
        y = ndimage.gaussian_filter1d(d[:, c].astype(np.float64), 0.5 * perturn / GRID, mode="nearest", truncate=4)
        i = at.astype(np.int64)
        p = (y[i] + (at - i) * (y[i + 1] - y[i])).reshape(turns, GRID)
        p -= p.min() - 1e3
        comp, exp = (360, 0) if end == 0 else (0, 360)
        lo = np.median(p[:, exp + 300: exp + 360], axis=1)
        hi = np.median(p[:, comp + 320: comp + 360], axis=1)
        lp = np.log(p)
        s_open = exp + np.argmax(p[:, exp: exp + 360] < lo[:, None], axis=1)
        d_open = comp + np.argmax(p[:, comp: comp + 360] > hi[:, None], axis=1)
        for name, seg in (("comp_early", comp + 60), ("comp_late", comp + 120), ("exp_early", exp + 20), ("exp_late", exp + 70)):
            x = lv[seg: seg + 60] - lv[seg: seg + 60].mean()
            out[c, name] = lp[:, seg: seg + 60] @ x / (x @ x)
        out[c, "work"] = p @ dv
        out[c, "mass"] = (lp[:, comp + 150] - lp[:, comp + 60]) + K * (lv[comp + 150] - lv[comp + 60])
        opens.append((s_open, d_open, np.full(turns, comp), np.full(turns, exp)))
    impact = signal.butter(2, [2000, 20000], btype="band", fs=rate, output="sos")
    leak = signal.butter(2, [10000, 20000], btype="band", fs=rate, output="sos")
    last, first = edges[-1], edges[:-1]
    w = int(0.003 * rate)
    for c in range(1 + 2 * throws, 1 + 4 * throws):
        x = d[:, c].astype(np.float64)
        y = signal.sosfilt(leak, x)[:last]
        np.multiply(y, y, out=y)
        out[c, "leak"] = np.add.reduceat(y, first).reshape(turns, GRID) / bins
        y = signal.sosfilt(impact, x)[:last]
        np.abs(y, out=y)
        pk = np.maximum.reduceat(y, first).reshape(turns, GRID)
        y *= y
        sq = np.add.reduceat(y, first).reshape(turns, GRID)
        out[c, "rms"] = np.sqrt(sq / bins)
        run = np.cumsum(y)
        throw = (c - 1 - 2 * throws) // 2
        for e in (0, 1):
            for k, deg in enumerate(opens[2 * throw + e]):
                win = (deg[:, None] + np.arange(-10, 30)) % GRID
                v = np.take_along_axis(pk, win, 1)
                top = v.max(axis=1)
                on = np.argmax(v > 0.35 * top[:, None], axis=1)
                j = np.minimum(first.reshape(turns, GRID)[np.arange(turns), win[np.arange(turns), on]], last - w - 1)
                out[c, e, k] = top, on, (run[j + w] - run[j]) / w
    dt = time.perf_counter() - t0
    json.dump(dict(channels=int(d.shape[1]), rate=int(rate), turns=int(turns), signal_s=round(n / rate, 3),
                   work_s=round(dt, 3), realtime_factor=round(n / rate / dt, 2)), sys.stdout)
    print()


if __name__ == "__main__":
    main()
