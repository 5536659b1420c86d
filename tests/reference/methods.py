"""Values that tests/reference_methods.rs is held to: multivariate criteria, Welch-James, largest contrasts, outlying values.

Formulas in 40-digit arithmetic (mpmath), scipy, statsmodels and R's oneway.test, as named beside each value; no line of
this project's code runs here. Multivariate criteria come from 50-digit arithmetic that agrees with R's to 1e-13 (values
handed over with the data of Potthoff & Roy 1964 and O'Brien & Kaiser 1985: o2_orthodont.json, o3_obrienkaiser.json).

Usage: python3 methods.py o2_orthodont.json o3_obrienkaiser.json > methods.json; writes methods_invented.csv too.
"""

import csv
import json
import os
import subprocess
import sys

import mpmath as mp
import numpy as np
import scipy.linalg as sl
import scipy.stats as st
import statsmodels.api as sm
from statsmodels.multivariate.manova import MANOVA
from statsmodels.stats.oneway import anova_oneway

HERE = os.path.dirname(os.path.abspath(__file__))
mp.mp.dps = 40
found = []


def put(name, value, source):
    found.append({"name": name, "value": float(value), "source": source})


# --- Invented data: three arms of unequal size and spread, four occasions, two covariates -------------------------------

rng = np.random.default_rng(20)
SIZES = {"a": 9, "b": 7, "c": 12}
with open(os.path.join(HERE, "methods_invented.csv"), "w", newline="\n") as file:
    file.write("subject,arm,z1,z2,y1,y2,y3,y4\n")
    number = 0
    for index, (arm, size) in enumerate(SIZES.items()):
        for _ in range(size):
            number += 1
            z1, z2 = rng.normal(45 + 2 * index, 9), rng.normal(3, 0.4)
            level = rng.normal(0, 2 + index)
            gain = np.array([0, 1, 1.5, 1.7]) * (1 + index)
            y = 30 + 0.15 * z1 - 2 * z2 + level + gain + rng.normal(0, [1, 1.5, 2, 3]) * (1 + 0.5 * index)
            file.write(f"S{number:02},{arm},{z1:.0f},{z2:.2f}," + ",".join(f"{v:.1f}" for v in y) + "\n")


def table(file, columns):
    rows = list(csv.DictReader(open(os.path.join(HERE, file))))
    return rows, np.array([[float(row[c]) for c in columns] for row in rows])


rows, Y = table("methods_invented.csv", ["y1", "y2", "y3", "y4"])
arms = np.array([row["arm"] for row in rows])
_, Z = table("methods_invented.csv", ["z1", "z2"])
three = [Y[arms == a] for a in SIZES]
rows, P = table("potthoff_roy_1964.csv", ["d8", "d10", "d12", "d14"])
sex = np.array([row["sex"] for row in rows])
two = [P[sex == s] for s in ("Male", "Female")]
HOURS = [f"{phase}_{hour}" for phase in ("pre", "post", "fup") for hour in range(1, 6)]
rows, O = table("obrien_kaiser_1985.csv", HOURS)
six = [O[[r["treatment"] == t and r["gender"] == g for r in rows]] for t in ("control", "A", "B") for g in ("F", "M")]

# --- Multivariate criteria ----------------------------------------------------------------------------------------------

for data, path in zip(("potthoff_roy", "obrien_kaiser"), sys.argv[1:]):
    for record in json.load(open(path))["values"]:
        if record["name"].startswith("manova/"):
            put(f"{data}/{record['name']}", record["digits"], "50 digits; " + record["second"]["by"])


def wilks_tail(value, p, r, nu):
    """P(Lambda < value): Lambda is a product of independent betas (Anderson 1958, 8.5), here of two."""
    if r < p:
        p, r, nu = r, p, nu + r - p
    assert p == 2

    def beta_cdf(x, a, b):
        return mp.betainc(a, b, 0, x, regularized=True)

    a1, a2, b = mp.mpf(nu) / 2, mp.mpf(nu - 1) / 2, mp.mpf(r) / 2
    density = lambda x: x ** (a1 - 1) * (1 - x) ** (b - 1) / mp.beta(a1, b)
    inside = mp.quad(lambda x: density(x) * beta_cdf(value / x, a2, b), [value, (1 + value) / 2, 1])
    return beta_cdf(value, a1, b) + inside


NU = {"potthoff_roy": 25, "obrien_kaiser": 10}
RANKS = {"treatment": 2, "gender": 1, "group": 1, "phase": 2, "hour": 4, "time": 3}
for record in list(found):
    data, _, effect, criterion, what = record["name"].split("/")
    if criterion == "wilks" and what == "stat":
        r = q = 1
        for factor in effect.split(":"):
            if factor in ("treatment", "gender", "group"):
                r *= RANKS[factor]
            else:
                q *= RANKS[factor]
        if min(r, q) == 2:
            p = wilks_tail(mp.mpf(record["value"]), q, r, NU[data])
            put(f"{data}/exact/{effect}/wilks/p", p, "product of two betas (Anderson 1958, 8.5), mpmath quadrature")

# Covariates, by a second library.
centred = Z - Z.mean(0)
S = np.array([{"a": [1, 0], "b": [0, 1], "c": [-1, -1]}[a] for a in arms], float)
X = np.column_stack([np.ones(len(Y)), S, centred])
changes = np.array([[-1, 1, 0, 0], [0, -1, 1, 0], [0, 0, -1, 1]], float)
for name, L in [("arm:occasion", np.eye(5)[1:3]), ("occasion", np.eye(5)[:1])]:
    stat = MANOVA(Y @ changes.T, X).mv_test([(name, L)]).results[name]["stat"]
    for criterion in ["Pillai's trace", "Wilks' lambda", "Hotelling-Lawley trace", "Roy's greatest root"]:
        put(f"covariates/{name}/{criterion}", stat.loc[criterion, "Value"], "statsmodels MANOVA.mv_test")

# --- Welch-James --------------------------------------------------------------------------------------------------------


def welch_james(name, groups, L, C, source="formulas of Keselman, Carriere & Lix 1993 with whole block matrices, mpmath"):
    """The approximate degrees of freedom test by its definition: R = L x C on the stacked cell means."""
    b = groups[0].shape[1]
    size = b * len(groups)
    means = mp.matrix(size, 1)
    V = mp.matrix(size, size)
    for j, group in enumerate(groups):
        n = len(group)
        exact = [[mp.mpf(repr(float(v))) for v in row] for row in group]
        mean = [mp.fsum(row[k] for row in exact) / n for k in range(b)]
        for k in range(b):
            means[j * b + k] = mean[k]
            for l in range(b):
                V[j * b + k, j * b + l] = mp.fsum((row[k] - mean[k]) * (row[l] - mean[l]) for row in exact) / (n - 1) / n
    R = mp.matrix(np.kron(L, C).tolist())
    r = R.rows
    inner = mp.inverse(R * V * R.T)
    T = ((R * means).T * inner * (R * means))[0]
    A = mp.mpf(0)
    for j, group in enumerate(groups):
        Q = mp.matrix(size, size)
        for k in range(b):
            Q[j * b + k, j * b + k] = 1
        Pj = V * R.T * inner * R * Q
        trace = sum((Pj[k, k] for k in range(size)), mp.mpf(0))
        square = Pj * Pj
        A += (sum((square[k, k] for k in range(size)), mp.mpf(0)) + trace**2) / (len(group) - 1) / 2
    c = r + 2 * A - 6 * A / (r + 2)
    df2 = r * (r + 2) / (3 * A)
    F = T / c
    p = mp.betainc(df2 / 2, mp.mpf(r) / 2, 0, df2 / (df2 + r * F), regularized=True)
    for what, value in [("t", T), ("c", c), ("F", F), ("df1", r), ("df2", df2), ("p", p)]:
        put(f"welch-james/{name}/{what}", value, source)


differences = lambda k: np.array([[-1.0 if j == i else float(j == i + 1) for j in range(k)] for i in range(k - 1)])
average = lambda k: np.full((1, k), 1 / k)
welch_james("invented/arm:occasion", three, differences(3), differences(4))
welch_james("invented/occasion", three, average(3), differences(4))
welch_james("invented/arm", three, differences(3), average(4))
welch_james("invented/arm@y3", three, differences(3), np.eye(4)[2:3])
welch_james("invented/a,c:y2,y4", [three[0], three[2]], differences(2), np.array([[0.0, -1, 0, 1]]))
welch_james("invented/a,c:occasion", [three[0], three[2]], differences(2), differences(4))
welch_james("potthoff_roy/sex:age", two, differences(2), differences(4))
welch_james("obrien_kaiser/treatment:phase", six, np.kron(differences(3), average(2)), np.kron(differences(3), average(5)))
welch_james("obrien_kaiser/phase", six, average(6), np.kron(differences(3), average(5)))

# Welch's t for two arms, at one occasion and on changes; Welch's F for several arms.
for one, other in [("a", "b"), ("a", "c"), ("b", "c")]:
    for label, weights in [("y1", [1, 0, 0, 0]), ("y4", [0, 0, 0, 1]), ("y2-y4", [0, -1, 0, 1])]:
        first, second = Y[arms == one] @ weights, Y[arms == other] @ weights
        test = st.ttest_ind(second, first, equal_var=False)
        by = "scipy.stats.ttest_ind(equal_var=False)"
        name = f"welch/{one},{other}:{label}"
        put(f"{name}/estimate", second.mean() - first.mean(), by)
        put(f"{name}/t", test.statistic, by)
        put(f"{name}/df", test.df, by)
        put(f"{name}/p", test.pvalue, by)
for k in range(4):
    test = anova_oneway([g[:, k] for g in three], use_var="unequal", welch_correction=True)
    put(f"welch/arms@y{k + 1}/F", test.statistic, "Welch (1951), statsmodels anova_oneway(use_var='unequal')")
    put(f"welch/arms@y{k + 1}/df2", test.df[1], "Welch (1951), statsmodels anova_oneway(use_var='unequal')")
    put(f"welch/arms@y{k + 1}/p", test.pvalue, "Welch (1951), statsmodels anova_oneway(use_var='unequal')")
    code = f"d <- read.csv('methods_invented.csv'); o <- oneway.test(y{k + 1} ~ arm, d); cat(sprintf('%.17g', c(o$statistic, o$parameter[2], o$p.value)))"
    values = subprocess.run(["Rscript", "-e", code], capture_output=True, text=True, check=True, cwd=HERE).stdout.split()
    for what, value in zip(["F", "df2", "p"], values):
        put(f"welch-in-R/arms@y{k + 1}/{what}", value, "Welch (1951), R stats::oneway.test")

# One group: a paired t on one change; Hotelling's T^2 on all of them.
for arm, group in zip(SIZES, three):
    test = st.ttest_rel(group[:, 3], group[:, 0])
    put(f"paired/{arm}/t", test.statistic, "scipy.stats.ttest_rel")
    put(f"paired/{arm}/p", test.pvalue, "scipy.stats.ttest_rel")
    D = group @ changes.T
    t2 = len(D) * D.mean(0) @ np.linalg.solve(np.cov(D.T), D.mean(0))
    put(f"hotelling/{arm}/T2", t2, "Hotelling (1931), numpy")

# --- Largest product contrast -------------------------------------------------------------------------------------------


def positive_to_one(weights):
    weights = np.where(abs(weights) < 1e-12 * abs(weights).max(), 0, weights)
    weights = weights * np.sign(weights[np.argmax(abs(weights) > abs(weights).max() * (1 - 1e-9))])
    return weights / weights[weights > 0].sum()


def largest(name, means, sizes, E, nu, Pb, spread_a, spread_b):
    """a'Bb of largest (a'Bb)^2 / (a' diag(1/n) a b'b) with sum a = sum b = 0: a = sqrt(n) c, so that the best c and b are
    singular vectors of diag(sqrt n) B between the complements of sqrt(n) and 1."""
    root = np.sqrt(sizes)
    Pc = np.eye(len(sizes)) - np.outer(root, root) / sizes.sum()
    U, s, Vt = np.linalg.svd(Pc @ np.diag(root) @ means @ Pb)
    a = positive_to_one(spread_a(root * U[:, 0]))
    b = positive_to_one(spread_b(Vt[0]))
    q = round(np.trace(Pb))
    whole = (s**2).sum()
    rq = (len(sizes) - 1) * q
    mse = np.trace(E) / (nu * q)
    gg = np.trace(E) ** 2 / (q * np.trace(E @ E))
    by = "numpy.linalg.svd between complements"
    for k, value in enumerate(a):
        put(f"largest/{name}/a{k}", value, by)
    for k, value in enumerate(b):
        put(f"largest/{name}/b{k}", value, by)
    put(f"largest/{name}/ss", s[0] ** 2, by)
    put(f"largest/{name}/share", s[0] ** 2 / whole, by)
    put(f"largest/{name}/F", s[0] ** 2 / mse, by)
    put(f"largest/{name}/p", st.f.sf(s[0] ** 2 / mse / rq, rq, nu * q), "scipy.stats.f")
    put(f"largest/{name}/p_GG", st.f.sf(s[0] ** 2 / mse / rq, rq * gg, nu * q * gg), "scipy.stats.f")
    return a, b


centre = lambda k: np.eye(k) - 1 / k
within = lambda groups, W: sum((W @ (g - g.mean(0)).T @ (g - g.mean(0)) @ W.T) for g in groups)
same = lambda weights: weights
B = np.array([g.mean(0) for g in three])
a, b = largest("invented", B, np.array([9.0, 7, 12]), within(three, centre(4)), 25, centre(4), same, same)
put("largest/invented/estimate", a @ B @ b, "numpy")
# Treatments averaged over genders, phases averaged over hours (orthonormal: mean times sqrt 5).
B6 = np.array([g.mean(0) for g in six])
phases = np.kron(np.eye(3), np.full((1, 5), 1 / np.sqrt(5)))
inverse = np.array([1 / len(g) for g in six]).reshape(3, 2).sum(1) / 4
marginal = B6.reshape(3, 2, 15).mean(1) @ phases.T
a, b = largest(
    "obrien_kaiser", marginal, 1 / inverse, within(six, centre(3) @ phases), 10, centre(3),
    lambda w: np.repeat(w / 2, 2), lambda w: np.repeat(w / 5, 5),
)
put("largest/obrien_kaiser/estimate", a @ B6 @ b, "numpy")
# With covariates: the generalized eigenproblem of the whole design.
XX = np.linalg.inv(X.T @ X)
coefficients = XX @ X.T @ Y
L = np.eye(5)[1:3]
left = L @ coefficients @ centre(4)
values = sl.eigh(left @ left.T, L @ XX @ L.T, eigvals_only=True)
R = (Y - X @ coefficients) @ centre(4)
put("largest/covariates/ss", values[-1], "scipy.linalg.eigh of the whole design")
put("largest/covariates/share", values[-1] / values.sum(), "scipy.linalg.eigh of the whole design")
put("largest/covariates/F", values[-1] / ((R**2).sum() / (23 * 3)), "scipy.linalg.eigh of the whole design")

# --- Outlying values ----------------------------------------------------------------------------------------------------


def outlying(name, values, cell):
    cells = sorted(set(cell))
    design = np.array([[float(c == k) for k in cells] for c in cell])
    n, occasions = values.shape
    nu = n - len(cells)
    for k in range(occasions):
        t = sm.OLS(values[:, k], design).fit().get_influence().resid_studentized_external
        for i in range(n):
            put(f"studentized/{name}/{k}/{i}", t[i], "statsmodels OLSInfluence.resid_studentized_external")
            put(f"studentized/{name}/{k}/{i}/p", 2 * st.t.sf(abs(t[i]), nu - 1), "scipy.stats.t")
    # Each subject against the covariance of the others (1 - r'E^-1 r / (1 - h) = det E_(i) / det E), which gives D^2 and
    # its tail by Hotelling's F: another way than the scaled beta.
    R = values - design @ np.linalg.lstsq(design, values, rcond=None)[0]
    E = R.T @ R
    for i in range(n):
        keep = np.arange(n) != i
        others = np.array([values[keep & (np.array(cell) == c)].mean(0) for c in cells])
        Ei = sum((values[j] - others[cells.index(cell[j])])[:, None] * (values[j] - others[cells.index(cell[j])]) for j in range(n) if j != i)
        size = sum(c == cell[i] for c in cell)
        away = values[i] - others[cells.index(cell[i])]
        t2 = away @ np.linalg.solve(Ei / (nu - 1), away) / (1 + 1 / (size - 1))
        p = st.f.sf(t2 * (nu - occasions) / (occasions * (nu - 1)), occasions, nu - occasions)
        put(f"mahalanobis/{name}/{i}", R[i] @ np.linalg.solve(E / nu, R[i]), "numpy.linalg.solve on the pooled covariance")
        put(f"mahalanobis/{name}/{i}/p", p, "subject against the others: Hotelling's T^2 as F, numpy and scipy.stats.f")


outlying("invented", Y, list(arms))
outlying("potthoff_roy", P, list(sex))

print("{\n \"made_by\": \"methods.py\",\n \"values\": [")
print(",\n".join("  " + json.dumps(record) for record in found))
print(" ]\n}")
