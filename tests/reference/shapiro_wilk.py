"""Rewrites the columns w and p of shapiro_wilk.csv from its values: the formulas of AS R94 (Royston 1995) in 50 digits
(mpmath). Run: python3 shapiro_wilk.py"""
import csv, mpmath as M
from mpmath import mp, mpf
mp.dps = 50
polynomial = lambda text, u: M.fsum(mpf(c) * u**i for i, c in enumerate(text.split()))
quantile = lambda p: M.sqrt(2) * M.erfinv(2 * p - 1)


def royston(x):
    x = sorted(x)
    n, N = len(x), mpf(len(x))
    if n == 3:
        a = [M.sqrt(mpf(1) / 2)]
    else:
        m = [-quantile((mpf(i) - mpf(3) / 8) / (N + mpf(1) / 4)) for i in range(1, n // 2 + 1)]
        squares, u = 2 * M.fsum(v * v for v in m), 1 / M.sqrt(N)
        a = [polynomial("0 0.221157 -0.147981 -2.07119 4.434685 -2.706056", u) + m[0] / M.sqrt(squares)]
        if n > 5:
            a.append(polynomial("0 0.042981 -0.293762 -1.752461 5.682633 -3.582633", u) + m[1] / M.sqrt(squares))
        k = len(a)
        factor = M.sqrt((squares - 2 * M.fsum(v * v for v in m[:k])) / (1 - 2 * M.fsum(v * v for v in a)))
        a += [v / factor for v in m[k:]]
    mean = M.fsum(x) / n
    w = M.fsum(c * (x[n - 1 - i] - x[i]) for i, c in enumerate(a)) ** 2 / (2 * M.fsum(c * c for c in a) * M.fsum((v - mean) ** 2 for v in x))
    if n == 3:
        return w, max(mpf(0), 6 / M.pi * (M.asin(M.sqrt(w)) - M.asin(M.sqrt(mpf(3) / 4))))
    y, u = M.log(1 - w), M.log(N)
    if n <= 11:
        bound = polynomial("-2.273 0.459", N)
        if y >= bound:
            return w, mpf("1e-99")
        y = -M.log(bound - y)
        mu, log_sd = polynomial("0.544 -0.39978 0.025054 -6.714e-4", N), polynomial("1.3822 -0.77857 0.062767 -0.0020322", N)
    else:
        mu, log_sd = polynomial("-1.5861 -0.31082 -0.083751 0.0038915", u), polynomial("-0.4803 -0.082676 0.0030302", u)
    return w, M.erfc((y - mu) / M.exp(log_sd) / M.sqrt(2)) / 2


lines = open("shapiro_wilk.csv").read().splitlines()
with open("shapiro_wilk.csv", "w") as h:
    h.write("\n".join(lines[:2]) + "\n")
    for name, _, _, values in csv.reader(lines[2:]):
        w, p = royston([mpf(float(v)) for v in values.split()])
        h.write(",".join([name, M.nstr(w, 20), M.nstr(p, 20), values]) + "\n")
