"""The population after 100 000 repeats of four slices of 1 ns (two levels), by mpmath at 50 digits.

H / h of the slices, Hz: levels 0 and 370 kHz; coupling 3.1 MHz; upper level raised by 1.9 MHz; coupling 2.4i MHz; wait.
"""
from mpmath import mp, mpf, matrix, cos, sin, sqrt, exp, pi, eye

mp.dps = 50


def step(a, b, g, t):
    mean, d = (a + b) / 2, (a - b) / 2
    w = sqrt(d * d + abs(g) ** 2)
    c, s = cos(2 * pi * w * t), sin(2 * pi * w * t)
    u = matrix([[c - 1j * s * d / w, -1j * s * g / w], [-1j * s * mp.conj(g) / w, c + 1j * s * d / w]])
    return u * exp(-2j * pi * mean * t)


line, t = mpf(370000), mpf(1) / 10**9
steps = [
    step(mpf(0), line, mp.mpc(3100000), t),
    step(mpf(0), line + 1900000, mp.mpc(0), t),
    step(mpf(0), line, mp.mpc(0, -2400000), t),
    step(mpf(0), line, mp.mpc(0), t),
]
once = eye(2)
for u in steps:
    once = u * once
print(mp.nstr(abs((once**100000)[1, 0]) ** 2, 20))
