#!/usr/bin/env python3
"""Exact 3j, 6j and Clebsch-Gordan coefficients by SymPy, for the tests of src/model/angular_momentum.rs.

Writes angular_momentum.json beside itself: kind, arguments (doubled, so that halves are whole), value at 40 digits.
"""
import json
import pathlib
import random

from sympy import Rational, N
from sympy.physics.wigner import clebsch_gordan, wigner_3j, wigner_6j

random.seed(71)
half = lambda n: Rational(n, 2)
cases = []


def put(kind, doubled, value):
    cases.append({"kind": kind, "doubled": doubled, "value": str(N(value, 40)) if value != 0 else "0"})


def third(a, b):
    return random.choice(range(abs(a - b), a + b + 1, 2))


def projection(j):
    return random.choice(range(-j, j + 1, 2))


for largest, count in ((6, 60), (20, 50), (100, 40)):
    done = 0
    while done < count:
        j1, j2 = random.randint(0, largest), random.randint(0, largest)
        j3 = third(j1, j2)
        m1, m2 = projection(j1), projection(j2)
        if j3 > largest or abs(m1 + m2) > j3:
            continue
        put("3j", [j1, j2, j3, m1, m2, -m1 - m2], wigner_3j(*map(half, (j1, j2, j3, m1, m2, -m1 - m2))))
        put("cg", [j1, m1, j2, m2, j3, m1 + m2], clebsch_gordan(*map(half, (j1, j2, j3, m1, m2, m1 + m2))))
        done += 1
    done = 0
    while done < count:
        a, b, d, e = (random.randint(0, largest) for _ in range(4))
        c = third(a, b)
        if (d + e + c) % 2 or not abs(d - e) <= c <= d + e or c > largest:
            continue
        fs = [f for f in range(max(abs(a - e), abs(d - b)), min(a + e, d + b, largest) + 1) if (a + e + f) % 2 == 0 and (d + b + f) % 2 == 0]
        if not fs:
            continue
        f = random.choice(fs)
        put("6j", [a, b, c, d, e, f], wigner_6j(*map(half, (a, b, c, d, e, f))))
        done += 1
# the largest cancellations: all sizes 50, small projections
for m1, m2 in ((0, 0), (2, 4), (-2, 50), (10, -6)):
    put("3j", [100, 100, 100, m1, m2, -m1 - m2], wigner_3j(*map(half, (100, 100, 100, m1, m2, -m1 - m2))))
for j in (40, 80, 100):
    put("6j", [j] * 6, wigner_6j(*[half(j)] * 6))
place = pathlib.Path(__file__).with_name("angular_momentum.json")
place.write_text("[\n" + ",\n".join(json.dumps(case) for case in cases) + "\n]\n")
print(len(cases), "cases")
