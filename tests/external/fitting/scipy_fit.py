# SPDX-License-Identifier: GPL-3.0-or-later
"""Sampled responses by scipy.signal.cont2discrete and the fit's minimum by scipy.optimize.least_squares.

Input file: structure, sample rate, number of points, start values; then one line per point:
f  Re a  Im a  Re b  Im b  C_aa  C_bb  Re C_ab  Im C_ab.
Output: line 1 the parameters at the minimum, line 2 the cost there, line 3 Re and Im of the response at the start values.
"""
import sys

import numpy as np
from scipy.optimize import least_squares
from scipy.signal import cont2discrete, tf2ss


def state_space(structure, p):
    gain, a = p[0], p[1]
    if structure == "rate_damped":
        return tf2ss([gain], [1.0, a])
    lag = p[2]
    numerator = {"yaw_reaction": [gain * p[3], gain] if structure == "yaw_reaction" else None,
                 "heave_accel": [gain, 0.0]}.get(structure, [gain])
    return tf2ss(numerator, np.polymul([1.0, a], [lag, 1.0]))


def response(structure, p, f, rate):
    """Held input, output looked at m after a sample and delayed by d + 1 samples: total delay - half a sample = (d+1)/rate - m."""
    dt = 1.0 / rate
    tau = p[-1] - 0.5 * dt
    samples = np.floor(tau / dt) + 1
    m = samples * dt - tau
    system = state_space(structure, p)
    phi, gamma, c, d, _ = cont2discrete(system, dt, "zoh")
    phi_m, gamma_m, _, _, _ = cont2discrete(system, m, "zoh")
    z = np.exp(2j * np.pi * f * dt)
    out = np.empty(len(f), complex)
    for k, zk in enumerate(z):
        x = np.linalg.solve(zk * np.eye(len(phi)) - phi, gamma)
        out[k] = (c @ (phi_m @ x + gamma_m) + d).item() * zk**-samples
    return out


def main():
    with open(sys.argv[1]) as file:
        structure = file.readline().strip()
        rate = float(file.readline())
        start = np.array(file.readline().split(), float)
        data = np.loadtxt(file)
    f = data[:, 0]
    a, b = data[:, 1] + 1j * data[:, 2], data[:, 3] + 1j * data[:, 4]
    caa, cbb, cab = data[:, 5], data[:, 6], data[:, 7] + 1j * data[:, 8]

    def errors(x):
        h = response(structure, x * np.abs(start), f, rate)
        e = (a - h * b) / np.sqrt(caa + np.abs(h) ** 2 * cbb - 2 * np.real(np.conj(h) * cab))
        return np.concatenate([e.real, e.imag])

    fit = least_squares(errors, np.sign(start), jac="3-point", x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15)
    print(*[repr(float(v)) for v in fit.x * np.abs(start)])
    print(repr(float(2 * fit.cost)))
    h = response(structure, start, f, rate)
    print(*[repr(float(v)) for v in np.concatenate([h.real, h.imag])])


main()
