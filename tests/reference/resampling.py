"""Writes resampling.json: randomisation tests and BCa quantities from scipy, joint p by plain listing.

scipy.stats.permutation_test lists all deals; the Westfall-Young values are counted here over itertools' permutations, with
statistics from scipy.stats and numpy only. All data are invented. Run: python3 resampling.py > resampling.json
"""
import itertools, json
import numpy as np
from scipy import special, stats
from scipy.stats._resampling import _bca_interval


def change(y):
    return y[:, 2] - y[:, 0]


def t_change(a, b):
    return stats.ttest_ind(change(b), change(a)).statistic


def interaction_f(*arms):
    """Split-plot F of arm by occasion from cell means, Kirk's computational form, equal weights, unequal n by regression."""
    y = np.vstack(arms); n = [len(a) for a in arms]; g, b = len(arms), y.shape[1]
    # Helmert contrasts of occasions, each a one-way design on subjects: SS and error add up over orthonormal contrasts.
    m = np.linalg.qr(np.column_stack([np.ones(b), np.eye(b)[:, 1:]]))[0][:, 1:]
    z = y @ m; edges = np.cumsum([0] + n); parts = [z[edges[i]:edges[i + 1]] for i in range(g)]
    between = sum(len(p) * ((p.mean(0) - z.mean(0)) ** 2).sum() for p in parts)
    within = sum(((p - p.mean(0)) ** 2).sum() for p in parts)
    q = b - 1
    return (between / ((g - 1) * q)) / (within / ((sum(n) - g) * q))


def test(arms, statistic, alternative):
    def on_rows(*samples, axis=-1):
        return statistic(*[y[np.asarray(s, int)] for s in samples])
    y = np.vstack(arms); edges = np.cumsum([0] + [len(a) for a in arms])
    samples = [np.arange(edges[i], edges[i + 1]) for i in range(len(arms))]
    r = stats.permutation_test(samples, on_rows, permutation_type="independent", n_resamples=np.inf, alternative=alternative, vectorized=False)
    return dict(statistic=float(r.statistic), p=float(r.pvalue), deals=len(r.null_distribution))


def deals(label):
    """Every distinct assignment, each once."""
    return sorted(set(itertools.permutations(label)))


def westfall_young(y, label):
    """All pieces of two arms and two occasions, own error of the two arms; by |t| and by two-sided p of t."""
    label = np.array(label); arms = sorted(set(label))
    pieces = [(a, b, k, l) for a, b in itertools.combinations(arms, 2) for k, l in itertools.combinations(range(y.shape[1]), 2)]

    def statistics(lab):
        lab = np.array(lab); t, p = [], []
        for a, b, k, l in pieces:
            d = y[:, l] - y[:, k]
            r = stats.ttest_ind(d[lab == b], d[lab == a]); t.append(abs(r.statistic)); p.append(r.pvalue)
        return t, p
    t0, p0 = map(np.array, statistics(label))
    every = [statistics(d) for d in deals(tuple(label))]
    T, P = np.array([e[0] for e in every]), np.array([e[1] for e in every])
    out = {}
    for name, size0, size in (("max_t", t0, T), ("min_p", -p0, -P)):
        slack = 1e-9 * np.abs(size0)
        order = np.argsort(-size0, kind="stable"); down = np.empty(len(order)); last = 0.0
        for rung, j in enumerate(order):
            rest = size[:, order[rung:]].max(1)
            last = max(last, float((rest >= size0[j] - slack[j]).mean())); down[j] = last
        single = [(size.max(1) >= size0[j] - slack[j]).mean() for j in range(len(order))]
        out[name] = dict(step_down=down.tolist(), single_step=[float(s) for s in single])
    out["p"] = (T >= t0 - 1e-9 * t0).mean(0).tolist(); out["t"] = t0.tolist(); out["deals"] = len(every)
    return out


def bca(data, statistic, replicates, level):
    lo, hi, a = _bca_interval(data, statistic, axis=-1, alpha=(1 - level) / 2, theta_hat_b=replicates, batch=None, xp=np)
    estimate = float(statistic(*data, axis=-1)); s = np.sort(replicates); b = len(s)
    share = ((replicates < estimate).sum() + (replicates <= estimate).sum()) / (2 * b)
    lo, hi = float(lo), float(hi)
    # Efron & Tibshirani (1993), section 12.5.
    rank = lambda p: int((b + 1) * p) if p <= 0.5 else b + 1 - int((b + 1) * (1 - p))
    jackknife = []
    for j, sample in enumerate(data):
        jackknife.append([float(statistic(*[np.delete(s, i) if k == j else s for k, s in enumerate(data)], axis=-1)) for i in range(len(sample))])
    return dict(estimate=estimate, level=level, z0=float(special.ndtri(share)), acceleration=float(a), lower_level=lo, upper_level=hi,
                lower=float(s[rank(lo) - 1]), upper=float(s[rank(hi) - 1]), replicates=replicates.tolist(), jackknife=jackknife)


def main():
    rng = np.random.default_rng(20261201)
    a, b = np.round(rng.normal(20, 4, (4, 3)), 1), np.round(rng.normal(20, 4, (4, 3)) + [0, 2, 5], 1)
    two = [a, b]
    ties = [np.array([[1, 2, 2], [1, 1, 3], [2, 2, 2], [0, 1, 2]], float), np.array([[1, 2, 3], [2, 3, 5], [1, 1, 3], [0, 2, 3]], float)]
    three = [np.round(rng.normal(20, 4, (3, 3)) + [0, i, 3 * i], 1) for i in range(3)]
    uneven = [np.round(rng.normal(20, 4, (n, 3)) + [0, i, 3 * i], 1) for i, n in enumerate((2, 3, 4))]
    out = {"two": dict(values=[x.tolist() for x in two]), "ties": dict(values=[x.tolist() for x in ties]),
           "three": dict(values=[x.tolist() for x in three]), "uneven": dict(values=[x.tolist() for x in uneven])}
    for name, arms in (("two", two), ("ties", ties)):
        out[name]["upper"] = test(arms, t_change, "greater"); out[name]["lower"] = test(arms, t_change, "less")
        out[name]["both"] = test(arms, lambda x, y: abs(t_change(x, y)), "greater")
        out[name]["interaction"] = test(arms, interaction_f, "greater")
    out["three"]["interaction"] = test(three, interaction_f, "greater")
    out["uneven"]["interaction"] = test(uneven, interaction_f, "greater")
    for name, arms in (("three", three), ("uneven", uneven)):
        label = [i for i, x in enumerate(arms) for _ in x]
        out[name]["joint"] = westfall_young(np.vstack(arms), label)

    # Whole numbers, so that sums do not depend on their order and ties are ties.
    x, y = np.round(rng.gamma(2, 3, 15)), np.round(rng.gamma(3, 3, 11))
    mean = lambda u, axis: np.mean(u, axis=axis)
    log_ratio = lambda u, v, axis: np.log(np.var(u, axis=axis, ddof=1) / np.var(v, axis=axis, ddof=1))
    draw = lambda f, data, n: np.array([f(*[rng.choice(s, len(s)) for s in data], axis=-1) for _ in range(n)])
    out["bca"] = [dict(name="mean of one sample", **bca((x,), mean, draw(mean, (x,), 499), 0.95)),
                  dict(name="log ratio of two variances", **bca((x, y), log_ratio, draw(log_ratio, (x, y), 799), 0.90))]

    # Whole intervals: scipy's own resamples of a standardized change; limits may differ by Monte Carlo error.
    z = np.round(rng.normal(50, 10, (24, 2)) + [[0, 4]], 1); z[:, 1] = np.round(0.6 * z[:, 0] + 0.8 * z[:, 1] - 20, 1)
    d = lambda u, v, axis: (v.mean(axis) - u.mean(axis)) / ((u.std(axis, ddof=1) + v.std(axis, ddof=1)) / 2)
    n, ours = 400_000, 40_000
    r = stats.bootstrap((z[:, 0], z[:, 1]), d, paired=True, n_resamples=n, method="BCa", rng=rng, batch=20_000, vectorized=True)
    est = float(d(z[:, 0], z[:, 1], -1)); dist = np.sort(r.bootstrap_distribution)
    data = (np.arange(24),)
    on_rows = lambda i, axis: d(z[i, 0], z[i, 1], -1)
    lo, hi, acc = _bca_interval(data, on_rows, axis=-1, alpha=0.025, theta_hat_b=r.bootstrap_distribution, batch=None, xp=np)
    whole = dict(values=z.tolist(), estimate=est, acceleration=float(acc), resamples=ours, scipy_resamples=n,
                 z0=float(special.ndtri(((dist < est).mean() + (dist <= est).mean()) / 2)), z0_error=float(1.2533 * np.sqrt(1 / ours + 1 / n)))
    for side, level in (("lower", float(lo)), ("upper", float(hi))):
        # Error of the share at a fixed level, and of the level through z0 (derivative about 2 phi(z_level)).
        error = np.sqrt(level * (1 - level) * (1 / ours + 1 / n)) + 2 * stats.norm.pdf(special.ndtri(level)) * whole["z0_error"]
        whole[side] = dict(level=level, least=float(np.quantile(dist, level - 4 * error)), most=float(np.quantile(dist, level + 4 * error)),
                           scipy=float(getattr(r.confidence_interval, "low" if side == "lower" else "high")))
    out["whole"] = whole

    # Freedman & Lane (1983): residuals of the model without arms, permuted; |t| of arms in the whole model.
    n = 18
    arm, z = np.arange(n) % 2, np.round(rng.normal(50, 10, n), 1)
    y = np.round(0.4 * z + 3 * arm + rng.gamma(2, 2, n), 1)
    full, less = np.column_stack([np.ones(n), arm, z]), np.column_stack([np.ones(n), z])
    inverse = np.linalg.inv(full.T @ full)

    def t_of(values):
        coefficients = inverse @ full.T @ values
        residuals = values - full @ coefficients
        return np.abs(coefficients[1]) / np.sqrt((residuals ** 2).sum(0) / (n - 3) * inverse[1, 1])
    fitted = less @ np.linalg.lstsq(less, y, rcond=None)[0]
    count, asked = 0, 400_000
    for _ in range(asked // 10_000):
        dealt = np.array([fitted + rng.permutation(y - fitted) for _ in range(10_000)]).T
        count += int((t_of(dealt) >= t_of(y) * (1 - 1e-9)).sum())
    out["freedman_lane"] = dict(arm=arm.tolist(), covariate=z.tolist(), values=y.tolist(), t=float(t_of(y)), p=count / asked, permutations=asked)
    print(json.dumps(out, indent=1))


main()
