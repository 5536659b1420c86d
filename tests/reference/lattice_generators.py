"""Prints the table of src/stats/dist/multivariate_t/lattice.rs: for each number of points N (prime) the Korobov generator a,
of those tried, whose lattice {n (1, a, a^2, ...) / N} has the least worst-case error P_2 with weights .3 * .75^j in 16
dimensions (Korobov 1959; Sloan & Joe 1994, Lattice Methods for Multiple Integration). Run: python3 lattice_generators.py"""
import numpy as np

DIMENSIONS, CANDIDATES = 16, 1500
WEIGHTS = 0.3 * 0.75 ** np.arange(DIMENSIONS)


def error(points, a):
    n = np.arange(points, dtype=np.int64)
    total = np.ones(points)
    z = 1
    for weight in WEIGHTS:
        x = (n * z % points) / points
        total *= 1 + weight * 2 * np.pi**2 * (x * x - x + 1 / 6)
        z = z * a % points
    return total.mean() - 1


for points in (127, 251, 509, 1021, 2039, 4093, 8191, 16381, 32749, 65521, 131071, 262139):
    tried = range(2, points // 2) if points < 2 * CANDIDATES else sorted({2 + (i * 2654435761) % (points // 2 - 2) for i in range(CANDIDATES)})
    tried = list(tried)[:: 1 if points < 60000 else 4 if points < 200000 else 10]
    best = min(tried, key=lambda a: error(points, a))
    print("    (%d, %d)," % (points, best), "// P_2 = %.3g" % error(points, best), flush=True)
