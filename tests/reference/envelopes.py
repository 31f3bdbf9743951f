"""Reference numbers for the envelopes, at 50 digits with mpmath, written to envelopes.json beside this script.

Values are the defining formulas at the very doubles that the tests use; slopes are numerical derivatives of those formulas
(mpmath.diff), areas adaptive quadratures of them (mpmath.quad), so that no closed form of the program is used twice.
The largest value of the band-limited curve is the largest of a dense search, refined by mpmath.findroot.
Run: python3 tests/reference/envelopes.py
"""

import json
import os

import mpmath as mp

mp.mp.dps = 50
F = mp.mpf


def lifted(g, c, edge):
    if edge == "step":
        return g
    return lambda t: (g(t) - g(F(0))) / (g(c) - g(F(0)))


def curve(word, p):
    """(function of t, kinks, length, uncut area)"""
    q = {k: F(v) for k, v in p.items() if isinstance(v, float)}
    L, rise, c = q.get("length"), q.get("rise"), q.get("cut_at")
    if word == "square":
        return lambda t: F(1), [], L, L
    if word in ("raised cosine", "sine squared"):
        return lambda t: (1 - mp.cos(2 * mp.pi * t / L)) / 2, [], L, None
    if word == "blackman":
        return lambda t: F("0.42") - F("0.5") * mp.cos(2 * mp.pi * t / L) + F("0.08") * mp.cos(4 * mp.pi * t / L), [], L, None
    if word in ("cosine edges", "trapezoid"):
        edge = (lambda s: (1 - mp.cos(mp.pi * s / rise)) / 2) if word == "cosine edges" else (lambda s: s / rise)
        return lambda t: edge(t) if t < rise else (edge(L - t) if t > L - rise else F(1)), [rise, L - rise], L, None
    if word == "gaussian":
        if "field_sigma" in q:
            sigma = q["field_sigma"]
        elif "field_fwhm" in q:
            sigma = q["field_fwhm"] / (2 * mp.sqrt(2 * mp.log(2)))
        else:
            sigma = q["intensity_fwhm"] / (2 * mp.sqrt(mp.log(2)))
        g = lambda t: mp.exp(-((t - c) ** 2) / (2 * sigma**2))
        return lifted(g, c, p["edge"]), [c], 2 * c, sigma * mp.sqrt(2 * mp.pi)
    if word == "sech":
        T = q["sech_time"]
        g = lambda t: mp.sech((t - c) / T)
        return lifted(g, c, p["edge"]), [c], 2 * c, mp.pi * T
    if word == "error-function edges":
        w = q["rise_10_90"] / (2 * mp.erfinv(F("0.8")))
        g = lambda t: (mp.erf((t - c + L / 2) / w) - mp.erf((t - c - L / 2) / w)) / 2
        peak = mp.erf(L / 2 / w)
        inner = [x for x in (c - L / 2, c, c + L / 2) if 0 < x < 2 * c]
        return lifted(g, c, p["edge"]), inner, 2 * c, L if p["edge"] == "step" else L / peak
    if word == "exponential edges":
        tau = q["rise_10_90"] / mp.log(9)
        on = lambda t: 1 - mp.exp(-t / tau)
        return lambda t: on(t) if t < L else on(L) * mp.exp(-(t - L) / tau), [L] if L / 2 + c > L else [], L / 2 + c, L
    assert word == "samples"
    v = [F(x) for x in p["samples"]]
    n = len(v)
    times = [F(x) for x in p["times"]] if "times" in p else None
    if p["between"] == "hold":
        starts = times or [k * L / n for k in range(n)]
        return lambda t: v[max(k for k in range(n) if starts[k] <= t)], starts[1:], L, None
    if times:
        L = times[-1]
    if p["between"] == "linear":
        at = times or [k * L / (n - 1) for k in range(n)]

        def line(t):
            k = max([k for k in range(n - 1) if at[k] <= t] or [0])
            return v[k] + (v[k + 1] - v[k]) * (t - at[k]) / (at[k + 1] - at[k])

        return line, at[1:-1], L, None
    step = L / (n - 1)
    return lambda t: mp.fsum(v[k] * mp.sincpi(t / step - k) for k in range(n)), [k * step for k in range(1, n - 1)], L, None


def largest(word, p, f, kinks, L):
    if word == "square":
        return F(1)
    if word == "samples" and p["between"] != "band limited":
        return max(abs(F(v)) for v in p["samples"])
    points = 2000
    best = max([L * F(k) / points for k in range(points + 1)] + kinks, key=lambda t: abs(f(t)))
    if 0 < best < L and best not in kinks:
        best = min(max(mp.findroot(lambda t: mp.diff(f, t) * L, (best - L / points, best + L / points), solver="anderson"), F(0)), L)
    return abs(f(best))


CASES = [
    ("square", {"length": 4e-7}),
    ("raised cosine", {"length": 9e-7}),
    ("sine squared", {"length": 7e-7}),
    ("blackman", {"length": 1e-6}),
    ("cosine edges", {"length": 1e-6, "rise": 3e-7}),
    ("cosine edges", {"length": 1e-6, "rise": 5e-7}),
    ("trapezoid", {"length": 8e-7, "rise": 1.5e-7}),
    ("gaussian", {"field_sigma": 2.1e-7, "cut_at": 5e-7, "edge": "step"}),
    ("gaussian", {"field_fwhm": 4e-7, "cut_at": 5e-7, "edge": "lift"}),
    ("gaussian", {"intensity_fwhm": 3e-7, "cut_at": 6e-7, "edge": "step"}),
    ("gaussian", {"field_sigma": 1e-6, "cut_at": 2e-7, "edge": "lift"}),
    ("gaussian", {"field_sigma": 1e-9, "cut_at": 6e-8, "edge": "lift"}),
    ("sech", {"sech_time": 1.2e-7, "cut_at": 6e-7, "edge": "step"}),
    ("sech", {"sech_time": 1.2e-7, "cut_at": 4e-7, "edge": "lift"}),
    ("sech", {"sech_time": 1e-6, "cut_at": 3e-7, "edge": "lift"}),
    ("sech", {"sech_time": 1e-9, "cut_at": 1e-6, "edge": "lift"}),
    ("error-function edges", {"length": 8e-7, "rise_10_90": 1.5e-7, "cut_at": 6e-7, "edge": "step"}),
    ("error-function edges", {"length": 8e-7, "rise_10_90": 3e-7, "cut_at": 5.5e-7, "edge": "lift"}),
    ("error-function edges", {"length": 3e-7, "rise_10_90": 6e-7, "cut_at": 5e-7, "edge": "step"}),
    ("error-function edges", {"length": 8e-7, "rise_10_90": 4e-7, "cut_at": 3e-7, "edge": "lift"}),
    ("exponential edges", {"length": 8e-7, "rise_10_90": 2.2e-7, "cut_at": 1.2e-6}),
    ("exponential edges", {"length": 3e-7, "rise_10_90": 2e-6, "cut_at": 1.5e-7}),
    ("exponential edges", {"length": 8e-7, "rise_10_90": 2.2e-7, "cut_at": 1e-7}),
    ("samples", {"length": 8e-7, "samples": [0.25, 1.0, -0.5, 0.5], "between": "hold"}),
    ("samples", {"length": 9e-7, "samples": [0.0, 1.0, 0.4, 0.0], "between": "linear"}),
    ("samples", {"length": 9e-7, "samples": [0.1, 0.9, 1.0, -0.4, 0.55, 0.2], "between": "band limited"}),
    ("samples", {"length": 2e-7, "samples": [1.0, -1.0, 1.0, -1.0, -1.0, 1.0, -1.0, 1.0], "between": "band limited"}),
    ("samples", {"length": 9e-7, "samples": [0.2, -1.0, 0.4], "times": [0.0, 1e-7, 6e-7], "between": "hold"}),
    ("samples", {"samples": [0.2, -1.0, 0.4, 0.3], "times": [0.0, 1e-7, 6e-7, 7.5e-7], "between": "linear"}),
    ("samples", {"samples": [0.2, -1.0, 0.4, 0.3], "times": [0.0, 1e-7, 2e-7, 3e-7], "between": "band limited"}),
]

SHARES = [0.0, 1e-9, 1e-3, 0.0713, 0.21, 0.3301, 0.4999, 0.5003, 0.64, 0.7417, 0.93, 0.999, 1 - 1e-9, 1.0]

table = []
for word, parameters in CASES:
    f, kinks, length, uncut = curve(word, parameters)
    area = mp.quad(f, [F(0)] + sorted(set(kinks)) + [length])
    times = [float(length) * share for share in SHARES]
    entry = {
        "word": word,
        "parameters": parameters,
        "length": float(length),
        "area": float(area),
        "uncut_area": float(area if uncut is None else uncut),
        "largest": float(largest(word, parameters, f, kinks, length)),
        "times": times,
        "values": [float(f(F(t))) for t in times],
        # One-sided, towards the inside.
        "slopes": [float(mp.diff(f, F(t), direction=1 if s < 0.5 else -1)) for s, t in zip(SHARES, times)],
    }
    table.append(entry)

with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "envelopes.json"), "w") as out:
    out.write("[\n" + ",\n".join(json.dumps(entry) for entry in table) + "\n]\n")
