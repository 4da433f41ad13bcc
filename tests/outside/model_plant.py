#!/usr/bin/python3
# SPDX-License-Identifier: Apache-2.0
"""Reference values for tests/unit/model/test_plant.c.

Machine, DC link and shaft are written down here a second time, in stator
coordinates and with phase quantities (the model integrates in rotor
coordinates), and integrated with SciPy's DOP853 to 1e-12. Each 100 us period
holds its duties. Run it by hand after a change of the equations, and copy the
line that it prints into the test.
"""
import numpy as np
from scipy.integrate import solve_ivp

P, PSI, LD, LQ, R = 4, 0.085, 3.1e-3, 4.5e-3, 0.9
J, VISCOUS, COULOMB, STICK = 0.0011, 0.0005, 0.05, 0.05
C, SUPPLY, SOURCE, BLEEDER = 470e-6, 310.0, 0.8, 1e4
SHIFT = 2 * np.pi / 3


def flux(theta, current):
    """Flux linkages of the three phases at an electrical angle."""
    axes = theta - np.array([0, SHIFT, -SHIFT])
    d = 2 / 3 * np.dot(current, np.cos(axes))
    q = -2 / 3 * np.dot(current, np.sin(axes))
    return (LD * d + PSI) * np.cos(axes) - LQ * q * np.sin(axes)


def currents(theta, linked):
    axes = theta - np.array([0, SHIFT, -SHIFT])
    d = (2 / 3 * np.dot(linked, np.cos(axes)) - PSI) / LD
    q = -2 / 3 * np.dot(linked, np.sin(axes)) / LQ
    return d * np.cos(axes) - q * np.sin(axes)


def slope(_, x, duty):
    linked, speed, angle, dc = x[:3], x[3], x[4], x[5]
    theta = P * angle
    current = currents(theta, linked)
    volts = (duty - duty.mean()) * dc
    # Torque from the phases: p/sqrt(3) times flux cross current.
    torque = P / np.sqrt(3) * (
        linked[0] * (current[1] - current[2])
        + linked[1] * (current[2] - current[0])
        + linked[2] * (current[0] - current[1]))
    friction = VISCOUS * speed + COULOMB * np.clip(speed / STICK, -1, 1)
    supply = max(0.0, (SUPPLY - dc) / SOURCE)
    out = np.empty(6)
    out[:3] = volts - R * current
    out[3] = (torque - friction) / J
    out[4] = speed
    out[5] = (supply - np.dot(duty, current) - dc / BLEEDER) / C
    return out


def main():
    theta0 = P * 0.3
    x = np.concatenate([flux(theta0, np.zeros(3)), [50.0, 0.3, SUPPLY]])
    for k in range(60):
        vector = 0.22 * np.exp(1j * (P * 50.0 * 1e-4 * k + 3.0))
        duty = np.array([0.5 + (vector * np.exp(-1j * n * SHIFT)).real for n in range(3)])
        x = solve_ivp(slope, (0, 1e-4), x, "DOP853", args=(duty,), rtol=1e-12, atol=1e-13).y[:, -1]
    current = currents(P * x[4], x[:3])
    print("a %.9f b %.9f c %.9f A, %.9f rad/s, %.9f rad, %.8f V" % (*current, x[3], x[4], x[5]))


main()
