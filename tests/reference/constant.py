"""exp(-i H t) on a basis state by mpmath at 60 digits: couplings of hundreds of GHz for 40 ns, and a splitting of 20 Hz on 10 MHz for 10 ms."""
from mpmath import mp, mpf, matrix, expm, pi, mpc

mp.dps = 60


def end(rows, t, start):
    n = len(rows)
    h = matrix(n, n)
    for j in range(n):
        for k in range(n):
            h[j, k] = mpc(rows[j][k])
    values, vectors = mp.eighe(h)
    psi = matrix(n, 1)
    for a in range(n):
        share = mp.conj(vectors[start, a]) * mp.exp(-2j * pi * values[a] * t)
        for j in range(n):
            psi[j] += vectors[j, a] * share
    return [mp.nstr(abs(psi[j]) ** 2, 20) for j in range(n)]


G = mpf(10) ** 9
print(end([[0, 310 * G, 95j * G], [310 * G, 870 * G, -220 * G], [-95j * G, -220 * G, -1430 * G]], mpf(40) / 10**9, 2))
M, e = mpf(10) ** 7, mpf(20)
print(end([[M, e, 0], [e, M + e, e], [0, e, M - 2 * e]], mpf(10) / 1000, 0))
