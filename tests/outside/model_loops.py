#!/usr/bin/python3
# SPDX-License-Identifier: Apache-2.0
"""Reference values for tests/unit/model/test_loops.c.

The sampled current loop as its own discrete transfer function: winding behind
a held voltage, one period of computing delay, PI by the magnitude optimum. And
the speed loop by the symmetric optimum in continuous time: prefilter, PI, one
lag for all the small ones, inertia. Both with SciPy. Run by hand; copy the
lines into the test.
"""
import numpy as np
from scipy import signal

H, R, L = 1e-4, 0.9, 3.1e-3


def current_loop():
    a = np.exp(-R * H / L)
    plant = ([(1 - a) / R], [1, -a])
    gain = L / (2 * 1.5 * H)
    control = ([gain, gain * (H * R / L - 1)], [1, -1])
    ahead = np.polymul(control[0], plant[0])
    under = np.polymul(np.polymul(control[1], plant[1]), [1, 0])
    closed = signal.dlti(ahead, np.polyadd(ahead, under), dt=H)
    _, (y,) = signal.dstep(closed, n=60)
    y = y[:, 0]
    print("current:", ", ".join("%.9f" % y[k] for k in (0, 1, 2, 3, 4, 5, 8, 10, 15, 20, 40)))
    print("current: overshoot %.6f %% at %d" % (100 * (y.max() - 1), y.argmax()))


def speed_loop():
    # In units of the lag T: 1/(1 + 4 s + 8 s^2 + 8 s^3), the symmetric optimum with prefilter.
    t = np.linspace(0, 60, 60001)
    _, y = signal.step(([1], [8, 8, 4, 1]), T=t)
    print("speed: overshoot %.6f %% at %.5f T" % (100 * (y.max() - 1), t[y.argmax()]))


current_loop()
speed_loop()
