"""Writes distributions_extra.csv: hard arguments (tiny tails, df of a million, fractional df, huge statistics),
by mpmath in 40 digits or more straight from the defining series and integrals. Run: python3 distributions_extra.py"""
import csv, mpmath as M
from mpmath import mp, mpf
mp.dps = 40
D = lambda s: mpf(float(s))      # the double that a program reads


def betainc(a, b, x):
    """I_x(a, b) by the series of 2F1(a + b, 1; a + 1; x), positive terms only; its complement above x = 1/2, with
    digits to spare for the subtraction."""
    if x > mpf(1) / 2:
        with mp.workdps(400):
            return 1 - betainc(b, a, 1 - x)
    with mp.workdps(mp.dps + 10):
        y = 1 - x
        s = t = mpf(1)
        n = 0
        while t > s * mpf(10) ** -mp.dps:
            t *= (a + b + n) / (a + 1 + n) * x
            s += t
            n += 1
        return M.exp(a * M.log(x) + b * M.log(y) + M.loggamma(a + b) - M.loggamma(a + 1) - M.loggamma(b)) * s


def t_sf(t, df):
    with mp.workdps(400):
        return betainc(df / 2, mpf(1) / 2, df / (df + t * t)) / 2


def f_sf(f, a, b):
    with mp.workdps(400):
        return betainc(b / 2, a / 2, b / (b + a * f))


def nct(t, df, delta, sign):
    """E Phi(sign (t S - delta)) by Gauss-Legendre over S in panels, normal tails by erfc."""
    lc = M.log(2) + df / 2 * M.log(df / 2) - M.loggamma(df / 2)
    g = lambda s: M.exp(lc + (df - 1) * M.log(s) - df * s * s / 2) * M.erfc(-sign * (t * s - delta) / M.sqrt(2)) / 2
    # panels around the peak of the integrand
    lo, hi = mpf(10) ** -6, mpf(40)
    grid = [M.exp(M.log(lo) + (M.log(hi) - M.log(lo)) * i / 600) for i in range(601)]
    m = max(grid, key=lambda s: g(s))
    for k in range(60):
        w = (mpf(1) / 40) * mpf(2) ** (-k / 2)
        m = max([m * (1 - w), m, m * (1 + w)], key=lambda s: g(s))
    c = abs(M.log(g(m * (1 + mpf(10) ** -8))) + M.log(g(m * (1 - mpf(10) ** -8))) - 2 * M.log(g(m))) / mpf(10) ** -16
    sd = m / M.sqrt(c)
    pts = [m + k * sd for k in range(-60, 61, 3) if m + k * sd > 0]
    if df < 200:
        pts = [mpf(0)] + pts + [m + 80 * sd, m + 150 * sd]
    return M.quad(g, pts)


def ncf(f, a, b, lam, upper):
    """Poisson mixture, forward recurrence in many digits."""
    with mp.workdps(60 + int(min(lam, 4000) / 8)):
        y, x = a * f / (a * f + b), b / (a * f + b)
        j0 = max(0, int(lam / 2 - 14 * M.sqrt(lam / 2) - 20)); j1 = int(lam / 2 + 16 * M.sqrt(lam / 2) + 60)
        A, B = a / 2 + j0, b / 2
        I = betainc(A, B, y)
        g = M.exp(A * M.log(y) + B * M.log(x) + M.loggamma(A + B) - M.loggamma(A + 1) - M.loggamma(B))
        w = M.exp(-lam / 2 + j0 * M.log(lam / 2) - M.loggamma(j0 + 1))
        s = mpf(0)
        for j in range(j0, j1):
            s += w * ((1 - I) if upper else I)
            I -= g
            g *= y * (A + B) / (A + 1)
            A += 1
            w *= lam / 2 / (j + 1)
        return s


rows = []
put = lambda name, args, v: (rows.append([name] + list(args) + [""] * (4 - len(args)) + [M.nstr(v, 22)]), print(rows[-1], flush=True))
for t, df in [("1e-8", "3"), ("1e-3", "1e6"), ("0.01", "1e6"), ("30", "1e6"), ("37", "1e6"), ("1.9", "999.5"), ("36", "1000"), ("39", "1000"),
              ("1e30", "1"), ("1e100", "2.5"), ("1e200", "1.2"), ("3", "0.3"), ("1e4", "60.4"), ("5", "1e5"), ("2", "12.34")]:
    put("t_sf", (t, df), t_sf(D(t), D(df)))
for p, df in [("1e-200", "7.7"), ("1e-290", "1000"), ("0.49", "3"), ("0.3", "0.7"), ("1e-100", "1e6"), ("0.025", "1e6"), ("1e-15", "1"), ("0.0005", "21.3")]:
    with mp.workdps(50):
        u = M.findroot(lambda u: M.log(t_sf(M.exp(u), D(df))) - M.log(D(p)), M.log(max(M.sqrt(-2 * M.log(D(p))) - 1, mpf("0.1"))), solver="secant", tol=1e-60, maxsteps=200) if p not in ("1e-200", "1e-15") else \
            M.findroot(lambda u: M.log(t_sf(M.exp(u), D(df))) - M.log(D(p)), -M.log(D(p)) / D(df), solver="secant", tol=1e-60, maxsteps=200)
    put("t_isf", (p, df), M.exp(u))
for f, a, b in [("1.0001", "1e6", "1e6"), ("0.99", "1000", "1000"), ("1.5", "1000", "1000"), ("3", "1000", "1000"), ("8", "1000", "900"), ("1.01", "2", "1e6"), ("300", "2", "1e6"),
                ("1.02", "1e5", "1e6"), ("1e8", "3", "8"), ("1e250", "1.5", "2.2"), ("2.7", "0.6", "5.5"), ("1e-6", "0.8", "31.2"), ("700", "3", "1000")]:
    put("f_sf", (f, a, b), f_sf(D(f), D(a), D(b)))
for f, a, b in [("0.2", "40", "1000"), ("1e-6", "3", "8"), ("0.5", "1000", "1000"), ("0.001", "10", "20.5")]:
    put("f_cdf", (f, a, b), f_sf(1 / D(f), D(b), D(a)))
for p, a, b in [("0.05", "3", "75"), ("0.95", "3", "75"), ("1e-10", "2.6", "65.04"), ("1e-100", "3", "1e6"), ("0.005", "10", "2154.1"), ("0.5", "1", "1"), ("1e-250", "4", "1000"), ("0.01", "0.7", "0.9")]:
    with mp.workdps(50):
        h = lambda u: M.log(f_sf(M.exp(u), D(a), D(b))) - M.log(D(p))
        lo, hi = mpf(-20), mpf(30)
        for _ in range(40):
            m = (lo + hi) / 2
            lo, hi = (m, hi) if h(m) > 0 else (lo, m)
        u = M.findroot(h, (lo, hi), solver="secant", tol=1e-60)
    put("f_isf", (p, a, b), M.exp(u))
for x, k in [("0.5", "0.7"), ("1e6", "1e6"), ("1010000", "1e6"), ("2500", "1000"), ("1500.5", "333.3"), ("30", "10.4"), ("900", "1000")]:
    with mp.workdps(60):
        put("chi2_sf", (x, k), M.gammainc(D(k) / 2, D(x) / 2, M.inf, regularized=True))
for x, k in [("1", "50"), ("0.001", "10"), ("600", "1000"), ("40", "333.3")]:
    with mp.workdps(60):
        put("chi2_cdf", (x, k), M.gammainc(D(k) / 2, 0, D(x) / 2, regularized=True))
for t, df, d in [("2", "1e6", "0.5"), ("505", "1e6", "500"), ("1004", "1e6", "1000"), ("3", "1e6", "14"), ("100", "9", "90"), ("-4", "30", "6"), ("40", "3", "38.5"), ("20", "1.5", "25"), ("1000", "10", "900"), ("2.5", "4.4", "20")]:
    for name, sign in (("nct_cdf", 1), ("nct_sf", -1)):
        put(name, (t, df, d), nct(D(t), D(df), D(d), sign))
for f, a, b, lam in [("5", "3", "25", "0.5"), ("40", "3", "75", "3"), ("4.2", "3", "57", "12"), ("3", "8.4", "60.5", "400"), ("1000", "3", "40", "3000"), ("100000", "2", "30", "200000"), ("2", "3", "1e6", "12"), ("1.2", "1000", "1000", "150")]:
    put("ncf_cdf", (f, a, b, lam), ncf(D(f), D(a), D(b), D(lam), False))
    put("ncf_sf", (f, a, b, lam), ncf(D(f), D(a), D(b), D(lam), True))
with open("distributions_extra.csv", "w", newline="") as h:
    h.write("# mpmath 40 digits and more, written by distributions_extra.py\n")
    w = csv.writer(h, lineterminator="\n")
    w.writerow(["function", "first", "second", "third", "fourth", "value"])
    w.writerows(rows)
