"""Values that whole plans are held to (tests/reference_method_plans.rs), from the children of Potthoff & Roy (1964).

Made with numpy, scipy and statsmodels, and the definitions named beside each value; no line of this project's code runs
here. Multivariate criteria, trends, standardized differences and differences in standardized change come from 50-digit
arithmetic that agrees with R (values handed over with the data, o2_orthodont.json).

Usage: python3 method_plans.py o2_orthodont.json > method_plans.json
"""

import csv
import itertools
import json
import os
import sys

import numpy as np
import scipy.stats as st
import statsmodels.api as sm
from statsmodels.stats.proportion import confint_proportions_2indep, proportion_confint

HERE = os.path.dirname(os.path.abspath(__file__))
AGES = ["8", "10", "12", "14"]
rows = list(csv.DictReader(open(os.path.join(HERE, "potthoff_roy_1964.csv"))))
Y = np.array([[float(r["d" + a]) for a in AGES] for r in rows])
male = np.array([r["sex"] == "Male" for r in rows])
F, M = Y[~male], Y[male]
n1, n2 = len(F), len(M)
n = n1 + n2
out = {}


def put(name, value, source):
    out[name] = {"value": float(value), "source": source}


# Multivariate criteria, trends, sizes: 50-digit values.
for record in json.load(open(sys.argv[1]))["values"]:
    name = record["name"]
    wanted = name.startswith(("manova/", "trend/", "es_between/", "es_ppc/"))
    if wanted and record["value"] is not None:
        put(name, record["value"], record["source"])

# Residuals.
fit = sm.OLS(Y[:, 0], np.column_stack([~male, male]).astype(float)).fit()
R = Y - np.where(male[:, None], M.mean(0), F.mean(0))
for k, age in enumerate(AGES):
    w, p = st.shapiro(R[:, k])
    put(f"shapiro/{age}/W", w, "scipy.stats.shapiro")
    put(f"shapiro/{age}/p", p, "scipy.stats.shapiro")
    ols = sm.OLS(Y[:, k], np.column_stack([~male, male]).astype(float)).fit()
    t = ols.get_influence().resid_studentized_external
    put(f"studentized/{age}", t[np.argmax(np.abs(t))], "statsmodels OLSInfluence.resid_studentized_external")
for a, b in zip(range(3), range(1, 4)):
    w, p = st.shapiro(R[:, b] - R[:, a])
    put(f"shapiro/{AGES[a]} vs {AGES[b]}/W", w, "scipy.stats.shapiro")
S = R.T @ R / (n - 2)
d2 = np.einsum("ij,jk,ik->i", R, np.linalg.inv(S), R)
k = int(np.argmax(d2))
lever = 1 - 1 / (n2 if male[k] else n1)
put("mahalanobis/D2", d2[k], "definition, numpy")
put("mahalanobis/p", st.beta.sf(d2[k] / (n - 2) / lever, 2, (n - 2 - 4) / 2), "scaled beta, scipy.stats.beta")


# Welch-James by its definition (Keselman, Carriere & Lix 1993), with explicit block matrices.
def welch_james(groups, L, C):
    means = np.concatenate([g.mean(0) for g in groups])
    b = groups[0].shape[1]
    V = np.zeros((len(means), len(means)))
    for j, g in enumerate(groups):
        V[j * b:(j + 1) * b, j * b:(j + 1) * b] = np.cov(g.T) / len(g)
    Rm = np.kron(L, C)
    inner = np.linalg.inv(Rm @ V @ Rm.T)
    T = (Rm @ means) @ inner @ (Rm @ means)
    r = Rm.shape[0]
    A = 0.0
    for j, g in enumerate(groups):
        Q = np.zeros_like(V)
        Q[j * b:(j + 1) * b, j * b:(j + 1) * b] = np.eye(b)
        P = V @ Rm.T @ inner @ Rm @ Q
        A += (np.trace(P @ P) + np.trace(P) ** 2) / (len(g) - 1)
    A /= 2
    c = r + 2 * A - 6 * A / (r + 2)
    df2 = r * (r + 2) / (3 * A)
    return T / c, r, df2, st.f.sf(T / c, r, df2)


C = np.array([[-1, 1, 0, 0], [0, -1, 1, 0], [0, 0, -1, 1]], float)
for name, L in [("sex by age", np.array([[-1.0, 1.0]])), ("age", np.array([[0.5, 0.5]]))]:
    f, df1, df2, p = welch_james([F, M], L, C)
    for what, value in [("F", f), ("df2", df2), ("p", p)]:
        put(f"welch-james/{name}/{what}", value, "Keselman, Carriere & Lix 1993, numpy")
for k, age in enumerate(AGES):
    t, p = st.ttest_ind(M[:, k], F[:, k], equal_var=False)
    put(f"welch/{age}/t", t, "scipy.stats.ttest_ind(equal_var=False)")
    put(f"welch/{age}/p", p, "scipy.stats.ttest_ind(equal_var=False)")

# One-sided test, equivalence, non-inferiority.
gain = Y[:, 3] - Y[:, 0]
put("one-sided/p", st.ttest_ind(gain[male], gain[~male], alternative="greater").pvalue, "scipy.stats.ttest_ind")
gain = Y[:, 1] - Y[:, 0]
for side, shift, alternative in [("lower", -2, "greater"), ("upper", 2, "less")]:
    p = st.ttest_ind(gain[male] - shift, gain[~male], alternative=alternative).pvalue
    put(f"tost/p_{side}", p, "scipy.stats.ttest_ind on shifted values")
s14 = np.sqrt(((n1 - 1) * F[:, 3].var(ddof=1) + (n2 - 1) * M[:, 3].var(ddof=1)) / (n - 2))
put("non-inferiority/p", st.ttest_ind(M[:, 3] + 0.5 * s14, F[:, 3], alternative="greater").pvalue, "scipy.stats.ttest_ind")

# Covariates.
centred = Y[:, 0] - Y[:, 0].mean()


def ancova(y):
    fit = sm.OLS(y, np.column_stack([np.ones(n), male.astype(float), centred])).fit()
    return fit.params[1], fit.bse[1], fit.pvalues[1], fit.df_resid


for name, y in [("14", Y[:, 3]), ("12", Y[:, 2]), ("10", Y[:, 1]), ("10 vs 14", Y[:, 3] - Y[:, 1]), ("mean", Y.mean(1))]:
    estimate, error, p, df = ancova(y)
    for what, value in [("estimate", estimate), ("standard_error", error), ("p", p), ("df", df)]:
        put(f"covariate/{name}/{what}", value, "statsmodels OLS")

# Omnibus of age with observed weights (sequential sums of squares): pooled means over all subjects.
grand = Y.mean(0)
ss = n * ((grand - grand.mean()) ** 2).sum()
E = np.zeros((4, 4))
for g in (F, M):
    E += (g - g.mean(0)).T @ (g - g.mean(0))
H = np.eye(4) - 0.25
sse = np.trace(H @ E @ H)
df = (n - 2) * 3
put("observed/age/F", (ss / 3) / (sse / df), "definition, numpy")
put("observed/age/omega", 3 * ((ss / 3) / (sse / df) - 1) / (3 * ((ss / 3) / (sse / df) - 1) + 3 + df + 1), "definition, numpy")

# Largest product contrast: singular value decomposition of the scaled interaction.
D = (M.mean(0) - F.mean(0)) @ H
put("largest/ss", (D @ D) / (1 / n1 + 1 / n2), "numpy; with two arms the whole effect")
put("largest/p", st.f.sf((D @ D) / (1 / n1 + 1 / n2) / 3 / (sse / df), 3, df), "uncorrected bound, scipy")

# Each level against the mean of the later ones, own occasions.
for k in range(3):
    w = np.zeros(4)
    w[k] = -1
    w[k + 1:] = 1 / (3 - k)
    a, b = F @ w, M @ w
    value = 0.5 * (a.mean() + b.mean())
    s2 = ((n1 - 1) * a.var(ddof=1) + (n2 - 1) * b.var(ddof=1)) / (n - 2)
    put(f"later/{AGES[k]}/estimate", value, "definition, numpy")
    put(f"later/{AGES[k]}/t", value / np.sqrt(s2 * 0.25 * (1 / n1 + 1 / n2)), "definition, numpy")

# Linear trend of the difference, per year of age.
w = np.array([-3, -1, 1, 3]) / 20 / 1.0
slope = Y @ (np.array([-3.0, -1, 1, 3]) / 20)
put("slope/estimate", slope[male].mean() - slope[~male].mean(), "least-squares slope per year, numpy")
put("slope/t", st.ttest_ind(slope[male], slope[~male]).statistic, "scipy.stats.ttest_ind")

# Sizes.
for k, age in enumerate(AGES):
    x, y = F[:, k], M[:, k]
    put(f"superiority/{age}", st.mannwhitneyu(y, x).statistic / (n1 * n2), "scipy.stats.mannwhitneyu")
    placements = [np.array([(x < v).mean() + 0.5 * (x == v).mean() for v in y]), np.array([(y < v).mean() + 0.5 * (y == v).mean() for v in x])]
    p = placements[0].mean()
    var = placements[0].var(ddof=1) / n2 + placements[1].var(ddof=1) / n1
    z = st.norm.isf(0.025) * np.sqrt(var) / (p * (1 - p))
    put(f"superiority/{age}/lower", 1 / (1 + np.exp(-(np.log(p / (1 - p)) - z))), "DeLong variance on the logit, numpy")

    def winsorized(v):
        g = int(0.2 * len(v))
        s = np.sort(v)
        s[:g], s[len(v) - g:] = s[g], s[len(v) - g - 1]
        return s.var(ddof=1)

    pooled = ((n1 - 1) * winsorized(x) + (n2 - 1) * winsorized(y)) / (n - 2)
    d = 0.642 * (st.trim_mean(y, 0.2) - st.trim_mean(x, 0.2)) / np.sqrt(pooled)
    put(f"robust/{age}", d, "scipy.stats.trim_mean; Algina, Keselman & Penfield 2005")
    put(f"reference sd/{age}", (y.mean() - x.mean()) / x.std(ddof=1), "definition, numpy")
for later in (1, 2, 3):
    reach = [int(((g[:, later] - g[:, 0]) >= 2).sum()) for g in (F, M)]
    name = f"8 vs {AGES[later]}"
    put(f"responders/{name}", reach[1] / n2 - reach[0] / n1, "counts")
    lo, hi = confint_proportions_2indep(reach[1], n2, reach[0], n1, method="newcomb", compare="diff")
    put(f"responders/{name}/lower", lo, "statsmodels confint_proportions_2indep(newcomb)")
    put(f"responders/{name}/upper", hi, "statsmodels confint_proportions_2indep(newcomb)")
    for sex, count, size in (("Female", reach[0], n1), ("Male", reach[1], n2)):
        lo, hi = proportion_confint(count, size, method="wilson")
        put(f"responders/{name} at {sex}", count / size, "counts")
        put(f"responders/{name} at {sex}/upper", hi, "statsmodels proportion_confint(wilson)")
    s = np.sqrt(((n1 - 1) * F[:, 0].var(ddof=1) + (n2 - 1) * M[:, 0].var(ddof=1)) / (n - 2))
    error = s * np.sqrt(2 * 0.2)
    for sex, g in (("Female", F), ("Male", M)):
        put(f"reliable/{name} at {sex}", ((g[:, later] - g[:, 0]) > st.norm.isf(0.025) * error).sum(), "Jacobson & Truax 1991, numpy")

# Multiplicity: p of the six pieces (own occasions), adjusted.
pairs = list(itertools.combinations(range(4), 2))
p = np.array([st.ttest_ind(Y[male, b] - Y[male, a], Y[~male, b] - Y[~male, a]).pvalue for a, b in pairs])
divisors = [6, 3, 3, 3, 2, 1]
order = np.argsort(p)
running = 0.0
for rank, place in enumerate(order):
    running = max(running, divisors[rank] * p[place])
    put(f"shaffer/{AGES[pairs[place][0]]} vs {AGES[pairs[place][1]]}", min(1.0, running), "Shaffer 1986, divisors from its table")
# Pooled error: all pairs of four equally weighted means under sphericity are Tukey's case.
for a, b in pairs:
    D1 = (M[:, b] - M[:, a]).mean() - (F[:, b] - F[:, a]).mean()
    t = D1 / np.sqrt(2 * sse / df * (1 / n1 + 1 / n2))
    put(f"max-t/{AGES[a]} vs {AGES[b]}", st.studentized_range.sf(abs(t) * np.sqrt(2), 4, df), "scipy.stats.studentized_range")
# Own errors: estimated correlations, 25 df.
W = np.array([[(k == b) - (k == a) for k in range(4)] for a, b in pairs], float)
cov = W @ E @ W.T
corr = cov / np.sqrt(np.outer(np.diag(cov), np.diag(cov)))
# By simulation of the four correlated means and their common chi (4 million draws: standard error below 2.5e-4).
rng = np.random.default_rng(1)
draws = rng.standard_normal((4_000_000, 4)) @ np.linalg.cholesky(E / (n - 2)).T @ W.T / np.sqrt(np.diag(W @ E @ W.T) / (n - 2))
largest = np.abs(draws).max(1) / np.sqrt(rng.chisquare(n - 2, len(draws)) / (n - 2))
for a, b in pairs:
    t = st.ttest_ind(Y[male, b] - Y[male, a], Y[~male, b] - Y[~male, a]).statistic
    put(f"max-t own/{AGES[a]} vs {AGES[b]}", (largest >= abs(t)).mean(), "simulation, standard error below 2.5e-4")

json.dump({"made by": "tests/reference/method_plans.py", "values": out}, sys.stdout, indent=1, sort_keys=True)
