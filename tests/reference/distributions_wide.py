"""Writes distributions_wide.csv: arguments spread at random (fixed generator) over the whole range that is promised, tails
down to 1e-300 with df to 1,000 and to 1e-60 with df to 1e6; by mpmath in 40 digits from positive series. scipy only picks the statistic that goes
with a tail. Run: python3 distributions_wide.py"""
import csv, random, mpmath as M, scipy.stats as st
from mpmath import mp, mpf
mp.dps = 40
random.seed(20261201)


def betainc(a, b, x):
    """I_x(a, b) by the series of 2F1(a + b, 1; a + 1; x): positive terms only."""
    with mp.workdps(mp.dps + 15):
        s = t = mpf(1)
        n = 0
        while t > s * mpf(10) ** -mp.dps:
            t *= (a + b + n) / (a + 1 + n) * x
            s += t
            n += 1
        return M.exp(a * M.log(x) + b * M.log1p(-x) + M.loggamma(a + b) - M.loggamma(a + 1) - M.loggamma(b)) * s


def beta_lower(a, b, x):
    if x * (a + b) <= a and x < 0.9:
        return betainc(a, b, x)
    with mp.workdps(360):
        return 1 - betainc(b, a, 1 - x)


def t_sf(t, df):
    return beta_lower(df / 2, mpf(1) / 2, df / (df + t * t)) / 2


def f_sf(f, a, b):
    return beta_lower(b / 2, a / 2, b / (b + a * f))


def chi2_lower(x, df):
    a, x = df / 2, x / 2
    with mp.workdps(mp.dps + 15):
        s = t = 1 / a
        n = 0
        while t > s * mpf(10) ** -mp.dps:
            n += 1
            t *= x / (a + n)
            s += t
        return M.exp(a * M.log(x) - x - M.loggamma(a)) * s


def chi2_sf(x, df):
    with mp.workdps(360):
        return 1 - chi2_lower(x, df)


def norm_sf(z):
    return M.erfc(z / M.sqrt(2)) / 2


rows = []


def put(name, args, value):
    rows.append([name] + list(args) + [""] * (4 - len(args)) + [M.nstr(value, 22)])
    print(rows[-1], flush=True)


def inverse(name, tail, at, args):
    """The statistic that goes with the double nearest to tail(at)."""
    p = float(tail(at))
    if not 1e-300 < p < 0.999:
        return
    with mp.workdps(40):
        u = M.findroot(lambda u: M.log(tail(M.exp(u))) - M.log(mpf(p)), (M.log(at), M.log(at) + mpf(10) ** -12), solver="secant", tol=mpf(10) ** -60)
        put(name, (repr(p),) + args, M.exp(u))


def pick(low, high):
    return "%.6g" % M.exp(random.uniform(M.log(low), M.log(high)))


class F:
    """F's quantile by the beta distribution's: scipy's own fails in far tails."""

    def __init__(self, a, b):
        self.a, self.b, self.beta = a, b, st.beta(b / 2, a / 2)

    def isf(self, p):
        x = self.beta.ppf(p)
        return self.b / self.a * (1 - x) / x if x > 0 else float("inf")


D = lambda s: mpf(float(s))
for top, deepest, count in ((1000, 300, 26), (1000000, 60, 10)):
    for i in range(count):
        df, a, b = (pick(0.7 if top == 1000 else 1000, top) for _ in range(3))
        if top > 1000 and i % 2:
            a = pick(1, 30)
        p = 10 ** -random.uniform(0.05, deepest)
        z = "%.7g" % st.norm.isf(p)
        put("norm_sf", (z,), norm_sf(D(z)))
        for name, inv, law, tail, args in (("t_sf", "t_isf", st.t(float(df)), lambda x: t_sf(x, D(df)), (df,)),
                                           ("f_sf", "f_isf", F(float(a), float(b)), lambda x: f_sf(x, D(a), D(b)), (a, b)),
                                           ("chi2_sf", "chi2_isf", st.chi2(float(df)), lambda x: chi2_sf(x, D(df)), (df,))):
            x = law.isf(p if name != "t_sf" or p < 0.5 else 0.3)
            if not 1e-150 < x < 1e150:
                continue
            x = "%.7g" % x
            put(name, (x,) + args, tail(D(x)))
            if i % 2 == 0:
                inverse(inv, tail, D(x), args)
        half_a, half_b = (repr(float(v) / 2) for v in (a, b))
        x = st.beta(float(half_a), float(half_b)).ppf(p)
        if 1e-200 < x < 1 - 1e-3:
            x = "%.7g" % x
            put("beta_cdf", (x, half_a, half_b), beta_lower(D(half_a), D(half_b), D(x)))
            if i % 2 == 0:
                inverse("beta_ppf", lambda v: beta_lower(D(half_a), D(half_b), v), D(x), (half_a, half_b))

with open("distributions_wide.csv", "w", newline="") as h:
    h.write("# mpmath 40 digits, written by distributions_wide.py\n")
    w = csv.writer(h, lineterminator="\n")
    w.writerow(["function", "first", "second", "third", "fourth", "value"])
    w.writerows(rows)
print(len(rows))
