"""Amplitudes at the end of three pulses, by SciPy's DOP853 at 1e-13 in the frame of the problem itself, nothing turned away.

i d(psi)/dt = H psi, H = A + c exp(-2 pi i (p + f t)) B + adjoint; frequencies in Hz.
"""
import numpy as np
from scipy.integrate import solve_ivp

TAU = 2 * np.pi


def end(levels, statics, terms, length, start=0):
    a = TAU * (np.diag(np.array(levels, dtype=complex)) + statics)
    y = np.zeros(len(levels), dtype=complex)
    y[start] = 1

    def slope(t, y):
        h = a.copy()
        for b, f, p, c in terms:
            m = TAU * c(t) * np.exp(-1j * TAU * (p + f * t)) * b
            h += m + m.conj().T
        return -1j * (h @ y)

    s = solve_ivp(slope, (0, length), y, method="DOP853", rtol=1e-13, atol=1e-14)
    return s.y[:, -1]


def entries(n, list_):
    m = np.zeros((n, n), dtype=complex)
    for r, c, v in list_:
        m[r, c] = v
    return m


both = entries(3, [(1, 0, 1), (0, 1, 1), (2, 1, 1.4), (1, 2, 1.4)])
hump = lambda length: lambda t: np.sin(np.pi * t / length) ** 2
cases = {
    "ladder, linear": ([0, 5.0, 9.7], 0, [(both, 5.0, 0.2, lambda t: 0.3 * hump(12)(t))], 12.0),
    "chirp": ([0, 3.0], 0, [(entries(2, [(1, 0, 1)]), 3.0, 0.0, lambda t: 1.1 * hump(4)(t) * np.exp(-1j * np.pi * 0.9 * (t - 2) ** 2))], 4.0),
    "static coupling, two drives": (
        [0, 1.5, -0.7],
        entries(3, [(0, 1, 0.3), (1, 0, 0.3), (1, 2, 0.2j), (2, 1, -0.2j)]),
        [(entries(3, [(2, 0, 1)]), 0.6, 0.1, lambda t: 0.5 * np.exp(-(((t - 1) / 0.8) ** 2))), (np.diag([0, 0.5, 0]), 0.0, 0.0, lambda t: 2 * np.tanh(t - 2))],
        5.0,
    ),
}
for name, case in cases.items():
    print(name, [(float(z.real), float(z.imag)) for z in end(*case)])
