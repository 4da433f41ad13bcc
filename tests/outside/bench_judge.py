#!/usr/bin/python3
# SPDX-License-Identifier: Apache-2.0
"""How fast a long block is judged, beside NumPy.

    bench_judge.py BENCH_JUDGE [ROWS]

Ten million rows of one step response with noise. Two references over the same
mapped file: plain (whole columns, as one would write it first) and chunked
(chunks of 65536 rows, crossing searches stop early, settling from the end).
Prints seconds and ratios; the best of five, of three for NumPy.
"""
import os
import subprocess
import sys
import tempfile
import time

import numpy as np

DTYPE = np.dtype([("sent", "<i8"), ("received", "<i8"), ("value", "<f8")])
CHUNK = 65536


def make(path, rows):
    h = 100_000
    before = rows // 100
    rng = np.random.default_rng(5)
    with open(path, "wb") as out:
        for begin in range(0, rows, 1_000_000):
            n = min(1_000_000, rows - begin)
            block = np.empty(n, DTYPE)
            t = (np.arange(begin, begin + n) - before) * h
            block["sent"] = t
            block["received"] = t + 40_000
            x = np.maximum(t, 0) * 1e-9 * 60 / (rows / 1e6)
            block["value"] = 1000 * (1 - np.exp(-0.5 * x) * (
                np.cos(0.8660254 * x) + 0.5773503 * np.sin(0.8660254 * x)))
            block["value"] += 0.5 * rng.standard_normal(n)
            block.tofile(out)


def plain(path):
    data = np.memmap(path, DTYPE, "r")
    y = np.array(data["value"])
    t = (data["sent"] + data["received"]) / 2e9
    first = y[t <= 0].mean()
    final = y[t > t[-1] * 0.8].mean()
    u = (y - first) / (final - first)
    rise = t[np.argmax(u >= 0.9)] - t[np.argmax(u >= 0.1)]
    over = 100 * (u.max() - 1)
    settle = t[np.nonzero(np.abs(u - 1) > 0.02)[0][-1] + 1]
    return rise, over, settle, final


def chunked(path):
    data = np.memmap(path, DTYPE, "r")
    y, sent, received = data["value"], data["sent"], data["received"]
    n = len(data)

    def t(i):
        return (int(sent[i]) + int(received[i])) / 2e9

    zero = int(np.searchsorted(received, 0))
    last = int(np.searchsorted(sent, int(sent[-1] * 0.8)))
    first = sum(y[i:min(i + CHUNK, zero)].sum() for i in range(0, zero, CHUNK)) / zero
    final = sum(y[i:i + CHUNK].sum() for i in range(last, n, CHUNK)) / (n - last)
    step = final - first

    def crossing(level):
        for i in range(0, n, CHUNK):
            hit = np.flatnonzero(y[i:i + CHUNK] >= level)
            if len(hit):
                return t(i + hit[0])

    rise = crossing(first + 0.9 * step) - crossing(first + 0.1 * step)
    over = 100 * ((max(y[i:i + CHUNK].max() for i in range(0, n, CHUNK)) - first) / step - 1)
    for end in range(n, 0, -CHUNK):
        begin = max(0, end - CHUNK)
        out = np.flatnonzero(np.abs(y[begin:end] - final) > 0.02 * step)
        if len(out):
            settle = t(begin + out[-1] + 1)
            break
    return rise, over, settle, final


def best(function, path, times):
    took = []
    for _ in range(times):
        begin = time.perf_counter()
        result = function(path)
        took.append(time.perf_counter() - begin)
    return min(took), result


def main():
    rows = int(sys.argv[2]) if len(sys.argv) > 2 else 10_000_000
    with tempfile.TemporaryDirectory() as folder:
        path = os.path.join(folder, "block")
        make(path, rows)
        lines = subprocess.run([sys.argv[1], path], capture_output=True, text=True,
                               check=True).stdout.splitlines()
        ours = min(float(line.split()[1]) for line in lines if line.startswith("seconds"))
        for line in lines:
            if not line.startswith("seconds"):
                print(line)
        naive, values = best(plain, path, 3)
        print("plain   rise %.6g s, overshoot %.4f %%, settling %.6g s, final %.6g" % values)
        early, values = best(chunked, path, 3)
        print("chunked rise %.6g s, overshoot %.4f %%, settling %.6g s, final %.6g" % values)
        print("judged in %.3f s, plain NumPy %.3f s, chunked NumPy %.3f s" % (ours, naive, early))
        print("ratio to plain %.2f (wanted: at most 0.35), to chunked %.2f (at most 1)" %
              (ours / naive, ours / early))


main()
