#!/usr/bin/python3
# SPDX-License-Identifier: Apache-2.0
"""step_response against an independent evaluation with SciPy.

    differential.py PRINT_STEP [RESPONSES]

Random linear systems (orders 1 to 4, with and without a zero) answer a step;
one half is sampled without noise, the other with it. Without noise the program
must give what plain interpolation of the same samples gives: crossings to a
thousandth of the sampling interval (what is left of the tail counts as noise
for the program), the peak to one interval and 0.02 % of the step. In both halves
its intervals must hold what the exact response gives, in all but a few cases:
each interval claims 95 %, so more than 7 % of misses over one metric are a
fault. Everything is seeded.
"""
import subprocess
import sys

import numpy as np
from scipy import optimize, signal

BAND = 0.02
METRICS = ("dead_time", "rise_time", "peak_time", "overshoot", "settling_time", "steady_state_error")
rng = np.random.default_rng(20260301)


def random_system():
    """Numerator and denominator with unit gain, dominant poles around 1 rad/s."""
    poles = []
    if rng.random() < 0.8:
        zeta = rng.uniform(0.25, 0.95)
        poles += [-zeta + 1j * np.sqrt(1 - zeta**2), -zeta - 1j * np.sqrt(1 - zeta**2)]
    else:
        poles += [-1.0]
    poles += list(-rng.uniform(1.5, 6, rng.integers(0, 3)))
    den = np.real(np.poly(poles))
    num = np.array([1.0])
    if len(poles) > 1 and rng.random() < 0.3:
        num = np.array([rng.uniform(0.05, 0.5), 1.0])
    return num * den[-1], den


def levels(t, y):
    """Initial and final values as the check defines them: means of rows."""
    end = t[-1]
    return y[t <= 0].mean(), y[t >= end - end / 5].mean()


def crossing(t, y, level):
    at = np.argmax(y >= level)
    return t[at - 1] + (level - y[at - 1]) / (y[at] - y[at - 1]) * (t[at] - t[at - 1])


def by_samples(t, y, command):
    first, final = levels(t, y)
    step = final - first
    u = (y - first) / step
    after = t > 0
    outside = np.nonzero(np.abs(u - 1) > BAND)[0][-1]
    edge = 1 + BAND * np.sign(u[outside] - 1)
    frac = (edge - u[outside]) / (u[outside + 1] - u[outside])
    peak = np.argmax(np.where(after, u, -9))
    return {
        "dead_time": crossing(t, u, 0.05),
        "rise_time": crossing(t, u, 0.9) - crossing(t, u, 0.1),
        "peak_time": t[peak] if u[peak] > 1 + 1e-3 else None,
        "overshoot": max(0.0, 100 * (u[peak] - 1)),
        "settling_time": t[outside] + frac * (t[outside + 1] - t[outside]),
        "steady_state_error": final - command,
    }


def exact(answer, omega, horizon):
    x = np.linspace(0, horizon, 20001)
    u = answer(x)

    def solve(level, near):
        return optimize.brentq(lambda s: answer(s) - level, x[near - 1], x[near])

    out = np.nonzero(np.abs(u - 1) > BAND)[0][-1]
    edge = 1 + BAND * np.sign(u[out] - 1)
    peak = np.argmax(u)
    top = optimize.minimize_scalar(lambda s: -answer(s), method="bounded",
                                   bounds=(x[max(peak - 1, 0)], x[min(peak + 1, len(x) - 1)]),
                                   options={"xatol": 1e-10})
    at = {level: solve(level, np.argmax(u >= level)) for level in (0.05, 0.1, 0.9)}
    return {
        "dead_time": at[0.05] / omega,
        "rise_time": (at[0.9] - at[0.1]) / omega,
        "peak_time": top.x / omega if u[peak] > 1.02 else None,
        "overshoot": max(0.0, 100 * (max(-top.fun, u[-1]) - 1)),
        "settling_time": solve(edge, out + 1) / omega,
        "steady_state_error": 0.0,
    }


def closed_form(num, den):
    residues, poles, _ = signal.residue(num, np.polymul(den, [1, 0]))

    def answer(x):
        x = np.asarray(x, dtype=float)
        total = np.real(sum(r * np.exp(p * np.maximum(x, 0)) for r, p in zip(residues, poles)))
        return np.where(x > 0, total, 0.0)

    return answer


def main():
    program, count = sys.argv[1], int(sys.argv[2]) if len(sys.argv) > 2 else 600
    cases, lines = [], []
    while len(cases) < count:
        num, den = random_system()
        answer = closed_form(num, den)
        horizon = (24 if len(cases) % 2 == 0 else 12) / -max(np.real(np.roots(den)))
        omega, step = rng.uniform(20, 200), rng.choice([-900, 400, 1500])
        noise = 0 if len(cases) % 2 == 0 else rng.uniform(5e-4, 4e-3) * abs(step)
        h = rng.uniform(0.02, 0.06) / omega
        t = np.arange(-np.ceil(0.15 * horizon / omega / h), horizon / omega / h) * h
        t = np.round((t + 0.37 * h) * 1e9) / 1e9
        y = 100 + step * answer(t * omega)
        cases.append((t, y, 100 + step, noise, exact(answer, omega, horizon)))
        y = y + noise * rng.standard_normal(len(t))
        cases[-1] = (t, y, 100 + step, noise, cases[-1][4])
        lines.append("%d %.17g %g %d" % (len(t), 100 + step, BAND, round(t[-1] * 1e9)))
        lines += ["%d %.17g" % (round(a * 1e9), b) for a, b in zip(t, y)]
    result = subprocess.run([program], input="\n".join(lines), capture_output=True, text=True,
                            check=True)
    compared, missed, unknown, faults = {}, {}, {}, []
    for number, (case, line) in enumerate(zip(cases, result.stdout.splitlines())):
        t, y, command, noise, truth = case
        words = line.split()
        got = {words[i]: [float(w) for w in words[i + 1:i + 4]] for i in range(0, len(words), 4)}
        wanted = truth if noise else by_samples(t, y, command)
        for name in METRICS:
            value, low, high = got[name]
            want = wanted[name]
            if want is None:
                continue
            key = (name, bool(noise))
            if np.isnan(value):
                unknown[key] = unknown.get(key, 0) + 1
                continue
            compared[key] = compared.get(key, 0) + 1
            held = truth[name] is None or low <= truth[name] <= high
            missed[key] = missed.get(key, 0) + (not held)
            if noise:
                continue
            h = t[1] - t[0]
            tolerance = {"peak_time": 1.01 * h, "overshoot": 0.02,
                         "steady_state_error": 1e-9 * abs(command)}.get(name, h / 1000)
            if abs(value - want) > tolerance:
                faults.append("response %d: %s is %.9g, SciPy says %.9g" %
                              (number, name, value, want))
    good = len(result.stdout.splitlines()) == count and not faults
    for key in sorted(compared):
        n, miss, blank = compared[key], missed.get(key, 0), unknown.get(key, 0)
        ok = miss <= 0.07 * n and blank <= 0.3 * (n + blank)
        good = good and ok
        print("%-20s %-8s compared %4d, unknown %3d, missed %3d%s" %
              (key[0], "noisy" if key[1] else "exact", n, blank, miss, "" if ok else "  WRONG"))
    for fault in faults[:10]:
        print(fault)
    sys.exit(0 if good else 1)


main()
