"""Check values for designs that are hard on the arithmetic; writes hard_designs.json beside itself.

The data are invented. Every value comes from its defining formula in 150-digit arithmetic (mpmath), from the doubles as
they are stored: cell means, least squares for unweighted means, traces, determinants by plain elimination.
"""
import json
import os
from mpmath import mp, mpf, log, exp, sqrt, fsum

mp.dps = 150
state = 20240611


def uniform():
    global state
    state = (state * 6364136223846793005 + 1442695040888963407) % 2 ** 64
    return (state >> 11) / 2 ** 53


def noise(steps=64):
    """Close to normal, a multiple of 1 / steps."""
    return round((sum(uniform() for _ in range(12)) - 6) * steps) / steps


def design(sizes, occasions, spread=0.7):
    rows, cell = [], []
    for group, size in enumerate(sizes):
        for _ in range(size):
            level = 4 * noise()
            rows.append([20 + level + 0.5 * group * k + k + spread * 2 * noise() * (1 + 0.25 * k) for k in range(occasions)])
            cell.append(group)
    return rows, cell


def dyadic(rows, steps=1024):
    return [[round(x * steps) / steps for x in row] for row in rows]


def mul(A, B):
    return [[fsum(a * b for a, b in zip(r, c)) for c in zip(*B)] for r in A]


def t(A):
    return [list(r) for r in zip(*A)]


def det(A):
    A = [list(r) for r in A]
    d = mpf(1)
    for c in range(len(A)):
        p = max(range(c, len(A)), key=lambda r: abs(A[r][c]))
        if p != c:
            A[c], A[p] = A[p], A[c]
            d = -d
        d *= A[c][c]
        for r in range(c + 1, len(A)):
            f = A[r][c] / A[c][c]
            A[r] = [x - f * y for x, y in zip(A[r], A[c])]
    return d


def helmert(n):
    return [[1 / sqrt(mpf(i * (i + 1)))] * i + [-mpf(i) / sqrt(mpf(i * (i + 1)))] + [mpf(0)] * (n - i - 1) for i in range(1, n)]


def moments(rows):
    n, b = len(rows), len(rows[0])
    m = [fsum(r[k] for r in rows) / n for k in range(b)]
    return n, m, [[fsum((r[i] - m[i]) * (r[j] - m[j]) for r in rows) for j in range(b)] for i in range(b)]


def add(A, B):
    return [[x + y for x, y in zip(r, q)] for r, q in zip(A, B)]


def trace(A):
    return fsum(A[i][i] for i in range(len(A)))


def expected(rows, cell, determinants, box):
    Y = [[mpf(x) for x in r] for r in rows]
    g, b = max(cell) + 1, len(rows[0])
    cells = [moments([r for r, c in zip(Y, cell) if c == j]) for j in range(g)]
    N = len(rows)
    nu = N - g
    E = cells[0][2]
    for c in cells[1:]:
        E = add(E, c[2])
    out = {}
    H = helmert(b)
    EM = mul(mul(H, E), t(H))
    sse = trace(EM)
    grand = [fsum(n * m[k] for n, m, _ in cells) / N for k in range(b)]
    inter = fsum(n * (m[k] - fsum(m) / b - grand[k] + fsum(grand) / b) ** 2 for n, m, _ in cells for k in range(b))
    equal = [fsum(m[k] for _, m, _ in cells) / g for k in range(b)]
    harmonic = mpf(g * g) / fsum(mpf(1) / n for n, _, _ in cells)
    time = harmonic * fsum((u - fsum(equal) / b) ** 2 for u in equal)
    group = b * fsum(n * (fsum(m) / b - fsum(grand) / b) ** 2 for n, m, _ in cells)
    sss = trace(E) - sse
    q = b - 1
    out["group:time SS"], out["group:time F"] = inter, inter / ((g - 1) * q) / (sse / (nu * q))
    out["time SS"], out["time F"] = time, time / q / (sse / (nu * q))
    out["group SS"], out["group F"] = group, group / (g - 1) / (sss / nu)
    out["error SS"], out["subjects SS"] = sse, sss
    sq = fsum(x * x for r in EM for x in r)
    e = sse ** 2 / (q * sq)
    out["greenhouse-geisser"] = e
    if nu - q * e > 0:
        out["huynh-feldt"] = ((nu + 1) * q * e - 2) / (q * (nu - q * e))
        out["huynh-feldt 1976"] = (N * q * e - 2) / (q * (nu - q * e))
    if determinants:
        lw = log(det(EM)) - q * log(sse / q)
        out["ln W"] = lw
        out["chi-square"] = -(nu - mpf(2 * q * q + q + 2) / (6 * q)) * lw
    if box:
        out["M"] = nu * log(det([[x / nu for x in r] for r in E])) - fsum((n - 1) * log(det([[x / (n - 1) for x in r] for r in S])) for n, _, S in cells)
    # the piece of the last two groups and the last two occasions: squared t of the difference scores
    (n1, m1, S1), (n2, m2, S2) = cells[-2], cells[-1]
    i, j = b - 2, b - 1
    est = (m2[j] - m2[i]) - (m1[j] - m1[i])
    err = sum(S[i][i] + S[j][j] - 2 * S[i][j] for S in (S1, S2))
    out["piece estimate"] = est
    out["piece se"] = sqrt(err / (n1 + n2 - 2) * (mpf(1) / n1 + mpf(1) / n2))
    out["piece F"] = (est / out["piece se"]) ** 2
    # Levene and Brown-Forsythe at the last occasion
    for name in ("mean", "median"):
        z = []
        for k in range(g):
            v = sorted(r[-1] for r, c in zip(Y, cell) if c == k)
            h = len(v) // 2
            mid = fsum(v) / len(v) if name == "mean" else (v[h] if len(v) % 2 else (v[h - 1] + v[h]) / 2)
            z.append([abs(x - mid) for x in v])
        mz = [fsum(v) / len(v) for v in z]
        gz = fsum(x for v in z for x in v) / N
        bz = fsum(len(v) * (m - gz) ** 2 for v, m in zip(z, mz))
        wz = fsum((x - m) ** 2 for v, m in zip(z, mz) for x in v)
        out["spread from " + name] = bz / (g - 1) / (wz / (N - g))
    return {k: mp.nstr(v, 20) for k, v in out.items()}


cases = []


def case(name, rows, cell, determinants=True, box=True):
    cases.append({"name": name, "cells": max(cell) + 1, "cell": cell, "values": rows, "expected": expected(rows, cell, determinants, box)})


rows, cell = design([5, 9, 40], 4)
rows = dyadic(rows)
case("ordinary, cells of 5, 9 and 40", rows, cell, box=True)
case("offset 1e9", [[x + 1e9 for x in r] for r in dyadic(rows, 64)], cell)
case("offset 1e12", [[x + 1e12 for x in r] for r in dyadic(rows, 64)], cell)
case("scale 1e-12", [[x * 1e-12 for x in r] for r in rows], cell)
case("scale 1e15", [[x * 1e15 for x in r] for r in rows], cell)
case("third occasion is the second but for 1e-7", [[r[0], r[1], r[1] + 2.0 ** -24 * round(16 * noise()), r[3]] for r in rows], cell)
case("scales 1e-12, 1, 1e6, 1e15", [[x * s for x, s in zip(r, (1e-12, 1, 1e6, 1e15))] for r in rows], cell)
case("scales 1e15, 1e6, 1, 1e-12", [[x * s for x, s in zip(r, (1e15, 1e6, 1, 1e-12))] for r in rows], cell)
rows, cell = design([15, 31], 11)
case("11 occasions", dyadic(rows), cell)
rows, cell = design([34, 40], 30)
case("30 occasions", dyadic(rows), cell)
rows, cell = design([3, 4], 12)
case("12 occasions, 7 subjects", dyadic(rows), cell, determinants=False, box=False)
rows, cell = design([2, 3, 300], 3)
case("cells of 2, 3 and 300", dyadic(rows), cell, box=False)

with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "hard_designs.json"), "w") as out:
    out.write('{"source": "defining formulas, 150-digit arithmetic (mpmath), hard_designs.py; data invented",\n"cases": [\n')
    out.write(",\n".join(json.dumps(c) for c in cases))
    out.write("\n]}\n")
