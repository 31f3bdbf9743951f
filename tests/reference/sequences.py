"""Reference numbers for whole sequences, by routes that share nothing with the program; written to sequences.json beside.

chain: seven levels with couplings of every phase, by mpmath.expm at 40 digits.
chirped_gaussian: three levels under a lab-frame linear drive with a gaussian envelope and a chirp, by scipy DOP853 at 1e-13.
echo: three pulses of different shapes with waits, linear drive, by scipy DOP853 at 1e-13.
quadrature: a ladder of four under a raised cosine with its derivative in quadrature, one-sided, by mpmath.odefun at 25 digits.

H in Hz: i d(psi)/dt = 2 pi H psi. Run: python3 tests/reference/sequences.py
"""

import json
import os

import mpmath as mp
import numpy as np
from scipy.integrate import solve_ivp


def chain():
    mp.mp.dps = 40
    n = 7
    h = mp.matrix(n, n)
    for k in range(n):
        h[k, k] = mp.mpf(10) ** 6 * (mp.mpf(37) / 10 * k - mp.mpf(k * k) / 4)
        for j in range(k):
            size = mp.mpf(10) ** 6 * (1 + mp.mpf(j) / 2) / (k - j) ** 2
            h[j, k] = size * (k - 2 * j + 1j * (j + 1)) / 8
            h[k, j] = mp.conj(h[j, k])
    u = mp.expm(-2j * mp.pi * h * mp.mpf("2.3e-6"), method="taylor")
    return {"populations": [mp.nstr(abs(u[k, 2]) ** 2, 20) for k in range(n)]}


def solve(h, start, times, marks):
    """populations at the marks; steps never cross one of the times"""
    psi, t, found = np.array(start, complex), 0.0, []
    for end in times:
        done = solve_ivp(lambda t, y: -2j * np.pi * (h(t) @ y), (t, end), psi, method="DOP853", rtol=1e-13, atol=1e-15)
        psi, t = done.y[:, -1], end
        if end in marks:
            found.append(list(np.abs(psi) ** 2))
    return found


def chirped_gaussian():
    levels = np.diag([0.0, 21e6, 39e6]).astype(complex)
    shape = np.zeros((3, 3), complex)
    shape[0, 1] = shape[1, 0] = 1.0
    shape[1, 2] = shape[2, 1] = 1.3
    sigma, cut, centre, rate, peak = 0.15e-6, 0.5e-6, 20.5e6, 3e12, 2.4e6

    def h(t):
        u = t - cut
        # carrier f(t) = centre + rate (t - cut); the centre runs on from 0, the chirp adds its integral from the start
        turns = centre * t + rate * (t * t / 2 - cut * t)
        return levels + peak * np.exp(-u * u / (2 * sigma**2)) * np.cos(2 * np.pi * turns) * shape

    return {"populations": solve(h, [1, 0, 0], [0.4e-6, 0.5e-6, 1e-6], [0.4e-6, 1e-6])}


def echo():
    levels = np.diag([0.0, 14e6]).astype(complex)
    sx = np.array([[0, 1], [1, 0]], complex)
    carrier, peak = 14.3e6, 3e6
    starts = [0.0, 0.5e-6, 1.2e-6]
    ends = [0.2e-6, 0.9e-6, 1.5e-6]
    phases = [0.0, 0.25, 0.125]

    def envelope(k, t):
        length = ends[k] - starts[k]
        s = t - starts[k]
        if k == 0:
            return (1 - np.cos(2 * np.pi * s / length)) / 2
        if k == 1:
            rise = 0.1e-6
            return min(s / rise, 1.0, (length - s) / rise)
        return 0.42 - 0.5 * np.cos(2 * np.pi * s / length) + 0.08 * np.cos(4 * np.pi * s / length)

    def h(t):
        total = levels.copy()
        for k in range(3):
            if starts[k] <= t <= ends[k]:
                total += peak * envelope(k, t) * np.cos(2 * np.pi * (carrier * t + phases[k])) * sx
        return total

    times = [0.2e-6, 0.5e-6, 0.6e-6, 0.8e-6, 0.9e-6, 1.2e-6, 1.5e-6]
    return {"populations": solve(h, [1, 0], times, [0.5e-6, 1.2e-6, 1.5e-6])}


def quadrature():
    # the frame of the drive, in which the one-sided drive stands still: populations do not depend on it
    mp.mp.dps = 25
    length, anharmonicity, area = mp.mpf("20e-9"), mp.mpf("-250e6"), mp.mpf("0.5")
    peak = area / (length / 2)
    grow = [mp.sqrt(k) for k in (1, 2, 3)]
    diagonal = [0, 0, anharmonicity, 3 * anharmonicity]

    def right(t, y):
        x = peak * (1 - mp.cos(2 * mp.pi * t / length)) / 2
        slope = peak * mp.pi / length * mp.sin(2 * mp.pi * t / length)
        # factor 1 against the anharmonicity: minus the slope over 2 pi times it, a quarter turn behind
        turning = (x + 1j * (-slope / (2 * mp.pi * anharmonicity))) / 2
        out = []
        for k in range(4):
            z = diagonal[k] * y[k]
            if k > 0:
                z += turning * grow[k - 1] * y[k - 1]
            if k < 3:
                z += mp.conj(turning) * grow[k] * y[k + 1]
            out.append(-2j * mp.pi * z)
        return out

    # mpmath.odefun takes real or complex lists; the Taylor series carries the digits
    y = mp.odefun(right, 0, [mp.mpc(1), mp.mpc(0), mp.mpc(0), mp.mpc(0)], tol=mp.mpf(10) ** -18)(length)
    return {"populations": [mp.nstr(abs(z) ** 2, 18) for z in y]}


if __name__ == "__main__":
    found = {"chain": chain(), "chirped_gaussian": chirped_gaussian(), "echo": echo(), "quadrature": quadrature()}
    with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "sequences.json"), "w") as file:
        json.dump(found, file, indent=1)
        file.write("\n")
    print(json.dumps(found, indent=1))
