"""Numbers of src/noise: Gauss rules and Fourier transforms of distributions at 30 digits. python3, mpmath."""
from mpmath import mp, mpf, quad, cos, linspace, matrix, eigsy, sqrt, atan

mp.dps = 40


def transform(cut, k):
    """Mean of cos(k x) over 1/(1 + x^2) from -cut to cut, scaled to area 1."""
    pieces = linspace(0, cut, 8 + int(cut * k))
    return quad(lambda x: cos(k * x) / (1 + x * x), pieces) / atan(cut)


def rule(beta_squared, n):
    """Nodes and weights from the recurrence of an even weight of area 1."""
    t = matrix(n, n)
    for k in range(1, n):
        t[k - 1, k] = t[k, k - 1] = sqrt(beta_squared[k - 1])
    values, vectors = eigsy(t)
    return [(values[j], vectors[0, j] ** 2) for j in range(n)]


def squared_coefficients(moments, n):
    """Recurrence coefficients from the moments by the determinants of Hankel (at 120 digits that is safe)."""
    d = [mpf(1)] + [mp.det(matrix([[moments[i + j] for j in range(m)] for i in range(m)])) for m in range(1, n + 1)]
    return [d[k - 1] * d[k + 1] / d[k] ** 2 for k in range(1, n)]


if __name__ == "__main__":
    for cut, k in [(5, 1), (5, 4), (5, "7.5"), (20, "0.7"), ("0.5", 9)]:
        print(f"({cut}, {k}, {mp.nstr(transform(mpf(cut), mpf(k)), 20)})")
    n = 5
    print("normal", [[mp.nstr(x, 20) for x in p] for p in rule([mpf(k) for k in range(1, n)], n)][3:])
    print("even", [[mp.nstr(x, 20) for x in p] for p in rule([mpf(k * k) / (4 * k * k - 1) for k in range(1, n)], n)][3:])
    mp.dps = 120
    cut = mpf(5)
    moments = [quad(lambda x: x**k / (1 + x * x), linspace(0, cut, 6)) / atan(cut) if k % 2 == 0 else mpf(0) for k in range(2 * n)]
    beta = squared_coefficients(moments, n)
    print("lorentzian, cut 5", [[mp.nstr(x, 20) for x in p] for p in rule(beta, n)][3:])
    mp.dps = 40
    from mpmath import ci, pi, log
    print("correlation of 1/f noise from 10 kHz to 2 MHz, size 1")
    for t in ["0", "1e-7", "1e-6", "3e-6"]:
        low, high = [2 * pi * mpf(f) * mpf(t) for f in ("1e4", "2e6")]
        print(t, mp.nstr(log(mpf(200)) if t == "0" else ci(high) - ci(low), 20))
