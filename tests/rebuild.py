#!/usr/bin/env python3
"""Computes again, from results.json alone, every test that rests on moments, and compares.

An independent short program: nothing of the project's code runs here, and nothing but the standard library is needed. It takes
each step's moments (n, means, covariance matrix of each cell) and each test's L and M, and repeats the textbook definitions
in plain doubles: the general linear hypothesis L B M = 0 (Muller & Peterson 1984), epsilons (Greenhouse & Geisser 1959; Huynh &
Feldt 1976; Lecoutre 1991), multivariate criteria (Rao 1951; Pillai 1955), Welch-James (Johansen 1980), Mauchly's W and Box's M.

Usage: rebuild.py STUDY/records/001/results.json...   exit status 1 where a number differs.
"""
import json
import math
import sys

TOLERANCE = 1e-7


def mul(a, b):
    return [[sum(x * y for x, y in zip(row, column)) for column in zip(*b)] for row in a]


def tr(a):
    return [list(row) for row in zip(*a)]


def add(a, b, factor=1.0):
    return [[x + factor * y for x, y in zip(r, s)] for r, s in zip(a, b)]


def scale(a, factor):
    return [[factor * x for x in row] for row in a]


def trace(a):
    return sum(a[i][i] for i in range(len(a)))


def solve(a, b):
    """a^-1 b and det a, by elimination with pivots."""
    n, work, det = len(a), [list(r) + list(s) for r, s in zip(a, b)], 1.0
    for i in range(n):
        pivot = max(range(i, n), key=lambda k: abs(work[k][i]))
        if pivot != i:
            work[i], work[pivot], det = work[pivot], work[i], -det
        det *= work[i][i]
        work[i] = [x / work[i][i] for x in work[i]]
        for k in range(n):
            if k != i and work[k][i]:
                work[k] = [x - work[k][i] * y for x, y in zip(work[k], work[i])]
    return [row[n:] for row in work], det


def identity(n):
    return [[float(i == j) for j in range(n)] for i in range(n)]


def beta_tail(a, b, x):
    """I_x(a, b) by the continued fraction (Lentz), for x on its short side."""
    if x <= 0:
        return 0.0
    if x >= 1:
        return 1.0
    if x > (a + 1) / (a + b + 2):
        return 1 - beta_tail(b, a, 1 - x)
    front = math.exp(math.lgamma(a + b) - math.lgamma(a) - math.lgamma(b) + a * math.log(x) + b * math.log1p(-x)) / a
    c, d = 1.0, 1 - (a + b) * x / (a + 1)
    d = 1 / d
    value = d
    for m in range(1, 10000):
        for k in (m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m)), -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1))):
            d, c = 1 / (1 + k * d), 1 + k / c
            value *= c * d
        if abs(c * d - 1) < 1e-15:
            break
    return front * value


def f_tail(f, df1, df2):
    return beta_tail(df2 / 2, df1 / 2, df2 / (df2 + df1 * f))


def t_tail(t, df):
    half = 0.5 * beta_tail(df / 2, 0.5, df / (df + t * t))
    return half if t > 0 else 1 - half


class Model:
    """Cells with their moments; covariates, which stand after the occasions, taken out within the cells fitted."""

    def __init__(self, cells, fitted):
        self.b = len(cells[0]["occasions"])
        k = len(cells[0].get("covariates", []))
        size = self.b + k
        self.cells = cells
        E = [[0.0] * size for _ in range(size)]
        n = 0
        for place in fitted:
            cell = cells[place]
            n += cell["n"]
            if cell["n"] > 1:
                E = add(E, cell["covariance"], cell["n"] - 1)
        self.n = n
        self.nu = n - len([c for c in fitted if cells[c]["n"]]) - k
        self.means = [(cell["means"] or [0.0] * size)[: self.b] for cell in cells]
        self.V = [[(1 / cells[i]["n"] if cells[i]["n"] else 0.0) if i == j else 0.0 for j in range(len(cells))] for i in range(len(cells))]
        Eyy = [row[: self.b] for row in E[: self.b]]
        if k:
            Ezy, Ezz = [row[: self.b] for row in E[self.b:]], [row[self.b:] for row in E[self.b:]]
            slopes, _ = solve(Ezz, Ezy)
            Eyy = add(Eyy, mul(tr(Ezy), slopes), -1)
            centre = [sum(cells[c]["n"] * cells[c]["means"][self.b + j] for c in fitted) / n for j in range(k)]
            D = [[cell["means"][self.b + j] - centre[j] for j in range(k)] for cell in cells]
            self.means = add(self.means, mul(D, slopes), -1)
            self.V = add(self.V, mul(D, solve(Ezz, tr(D))[0]))
        self.E = Eyy

    def error(self, M):
        return mul(tr(M), mul(self.E, M))

    def h(self, L, M):
        lbm = mul(mul(L, self.means), M)
        return mul(tr(lbm), solve(mul(L, mul(self.V, tr(L))), lbm)[0])


def length2(M):
    return sum(x * x for row in M for x in row) / len(M[0])


class Checker:
    def __init__(self, path):
        self.results = json.load(open(path))
        self.count = self.bad = 0

    def close(self, what, got, want, absolute=0.0):
        self.count += 1
        if not abs(got - want) <= max(TOLERANCE * max(abs(want), abs(got)), absolute):
            self.bad += 1
            print(f"differs: {what}: results.json says {want}, its moments give {got}")

    def moments(self, step):
        if step["moments_of"]:
            step = next(other for other in self.results["steps"] if other["id"] == step["moments_of"])
        return step["moments"]

    def run(self):
        for step in self.results["steps"]:
            cells = self.moments(step)
            if not cells:
                continue
            for entry in step["results"]:
                if entry["state"] != "done":
                    continue
                if step["species"] == "screen":
                    self.screen(step, cells, entry)
                elif step["species"] == "test":
                    self.test(step, cells, entry)
        return self.count, self.bad

    def screen(self, step, cells, entry):
        everyone = [i for i, cell in enumerate(cells) if cell["n"]]
        model = Model(cells, everyone)
        if step["kind"] == "equal covariance matrices":
            pooled = scale(model.E, 1 / model.nu)
            m = model.nu * math.log(solve(pooled, pooled)[1])
            m -= sum((cells[i]["n"] - 1) * math.log(solve(cells[i]["covariance"], cells[i]["covariance"])[1]) for i in everyone)
            self.close(entry["ref"], m, entry["statistic"]["value"])
        if step["kind"] == "sphericity":
            E = model.error(entry["hypothesis"]["M"])
            q = len(E)
            self.close(entry["ref"], solve(E, E)[1] / (trace(E) / q) ** q, entry["statistic"]["value"])

    def test(self, step, cells, entry):
        hypothesis, details, name = entry["hypothesis"], entry["details"], entry["ref"]
        L, M = hypothesis["L"], hypothesis["M"]
        method = step["settings"]["method"]
        if method == "randomisation":
            return
        if method == "welch-james":
            self.welch_james(name, cells, L, M, entry)
        elif method == "multivariate":
            self.multivariate(name, Model(cells, hypothesis["error_cells"]), L, M, entry)
        else:
            self.univariate(step, name, Model(cells, hypothesis["error_cells"]), L, M, entry)
        if "estimate" in details and len(L) == 1 and len(M[0]) == 1 and step["kind"] != "largest contrast":
            model = Model(cells, hypothesis["error_cells"])
            value = mul(mul(L, model.means), M)[0][0]
            size = max(abs(x) for cell in cells for x in cell["means"])
            self.close(name + " estimate", value, details["estimate"], 1e-12 * size)
            t, df = details["estimate"] / details["standard_error"], details["df_of_t"]
            if "margin_lower" in details or "margin_upper" in details:
                sides = []
                if "margin_lower" in details:
                    sides.append(t_tail((details["estimate"] - details["margin_lower"]) / details["standard_error"], df))
                if "margin_upper" in details:
                    sides.append(t_tail((details["margin_upper"] - details["estimate"]) / details["standard_error"], df))
                self.close(name + " p", max(sides), entry["p"], 1e-12)
            elif "p_two_sided" in details:
                # The side that the plan names is one of the two.
                self.close(name + " p", min(t_tail(t, df), t_tail(-t, df), key=lambda p: abs(p - entry["p"])), entry["p"], 1e-12)

    def univariate(self, step, name, model, L, M, entry):
        details = entry["details"]
        single = len(M[0]) == 1
        norm = length2(M) if single else 1.0
        H = scale(model.h(L, M), 1 / norm)
        r, q = len(L), len(M[0])
        strata = entry["hypothesis"].get("error_strata", [])
        if step["kind"] == "largest contrast":
            # The largest root of H, by powers.
            vector = [[1.0 + 0.1 * i] for i in range(q)]
            for _ in range(5000):
                vector = mul(H, vector)
                size = math.sqrt(sum(x[0] ** 2 for x in vector))
                vector = scale(vector, 1 / size)
            ss = mul(tr(vector), mul(H, vector))[0][0]
        else:
            ss = trace(H)
        if not strata:
            E = scale(model.error(M), 1 / norm)
            ms, df2 = trace(E) / (model.nu * q), model.nu * q
        elif len(strata) == 1:
            E = model.error(strata[0]["M"])
            ms, df2 = trace(E) / (model.nu * len(E)), model.nu * len(E)
        else:
            E, ms, variance = None, 0.0, 0.0
            for stratum in strata:
                part = model.error(stratum["M"])
                df = model.nu * len(part)
                part = stratum["share"] * trace(part) / df
                ms += part
                variance += part * part / df
            df2 = ms * ms / variance
        size = max(abs(x) for cell in model.cells for x in cell["means"]) ** 2
        self.close(name + " SS", ss, details["sum_of_squares"], 1e-20 * size)
        df1 = r * q if step["kind"] != "largest contrast" else 1
        if entry["statistic"]["name"] == "F":
            self.close(name + " F", ss / df1 / ms, entry["statistic"]["value"], 1e-20 * size / ms)
        self.close(name + " error df", df2, entry["statistic"]["df"][-1] if entry["statistic"]["name"] == "F" else details["df_of_t"])
        factor = 1.0
        if E is not None and len(E) > 1:
            qe = len(E)
            gg = trace(E) ** 2 / (qe * sum(x * x for row in E for x in row))
            # The three epsilons of the error matrix.
            nu = model.nu
            hf = ((nu + 1) * qe * gg - 2) / (qe * (nu - qe * gg)) if nu > qe * gg else None
            if "epsilon" in details:
                self.close(name + " epsilon", gg, details["epsilon"]["greenhouse-geisser"])
                if "huynh-feldt" in details["epsilon"]:
                    self.close(name + " Huynh-Feldt", hf, details["epsilon"]["huynh-feldt"])
            hf1976 = (model.n * qe * gg - 2) / (qe * (nu - qe * gg)) if nu > qe * gg else None
            factor = {"none": 1.0, "greenhouse-geisser": gg, "huynh-feldt": hf, "huynh-feldt 1976": hf1976, "lower bound": 1 / qe}[details["correction"]]
            factor = min(1.0, factor)
        if step["kind"] == "largest contrast":
            self.close(name + " p", f_tail(ss / ms / (r * q), r * q * factor, df2 * factor), entry["p"], 1e-12)
        elif "p_two_sided" not in details:
            self.close(name + " p", f_tail(ss / df1 / ms, df1 * (1.0 if q == 1 else factor), df2 * factor), entry["p"], 1e-12)

    def multivariate(self, name, model, L, M, entry):
        H, E = model.h(L, M), model.error(M)
        p, r, nu, q = len(M[0]), len(L), model.nu, len(M[0])
        s, m, n = min(p, r), (abs(r - p) - 1) / 2, (nu - p - 1) / 2
        both = add(H, E)
        criterion = entry["details"]["criterion"]
        if criterion == "pillai":
            value = trace(solve(both, H)[0])
            f, df1, df2 = (2 * n + s + 1) / (2 * m + s + 1) * value / (s - value), s * (2 * m + s + 1), s * (2 * n + s + 1)
        elif criterion == "wilks":
            value = solve(E, E)[1] / solve(both, both)[1]
            under = p * p + r * r - 5
            t = math.sqrt((p * p * r * r - 4) / under) if under > 0 else 1.0
            y = value ** (1 / t)
            df1, df2 = p * r, (nu - (p - r + 1) / 2) * t - (p * r - 2) / 2
            f = (1 - y) / y * df2 / df1
        elif criterion == "hotelling-lawley":
            value = trace(solve(E, H)[0])
            df1, df2 = s * (2 * m + s + 1), 2 * (s * n + 1)
            f = df2 * value / (s * df1)
        else:
            # With several roots Roy's has no p, and its entry is refused.
            value, d = trace(solve(E, H)[0]), max(p, r)
            df2 = nu - d + r
            df1, f = d, value * df2 / d
        self.close(name + " " + criterion, value, entry["details"]["criterion_value"])
        if entry["statistic"]["name"] == "F":
            self.close(name + " F", f, entry["statistic"]["value"])
            self.close(name + " p", f_tail(f, df1, df2), entry["p"], 1e-12)

    def welch_james(self, name, cells, L, M, entry):
        r = len(L) * len(M[0])
        total, means, parts = [[0.0] * r for _ in range(r)], [[0.0] for _ in range(r)], []
        q = len(M[0])
        for j, cell in enumerate(cells):
            column = [row[j] for row in L]
            if not any(column):
                continue
            S = scale(mul(tr(M), mul(cell["covariance"], M)), 1 / cell["n"])
            own = [[column[a // q] * column[c // q] * S[a % q][c % q] for c in range(r)] for a in range(r)]
            total = add(total, own)
            parts.append((own, cell["n"]))
            profile = mul([cell["means"]], M)[0]
            means = [[means[a][0] + column[a // q] * profile[a % q]] for a in range(r)]
        T = mul(tr(means), solve(total, means)[0])[0][0]
        A = 0.0
        for own, n in parts:
            P = solve(total, own)[0]
            A += (trace(mul(P, P)) + trace(P) ** 2) / (n - 1) / 2
        c, df2 = r + 2 * A - 6 * A / (r + 2), r * (r + 2) / (3 * A)
        if entry["statistic"]["name"] == "F":
            self.close(name + " F", T / c, entry["statistic"]["value"], 1e-12)
            self.close(name + " df", df2, entry["statistic"]["df"][1])
            self.close(name + " p", f_tail(T / c, r, df2), entry["p"], 1e-12)


def main():
    failed = False
    for path in sys.argv[1:]:
        count, bad = Checker(path).run()
        print(f"{path}: {count} numbers computed again, {bad} differ")
        failed |= bad > 0 or count == 0
    sys.exit(1 if failed else 0)


main()
