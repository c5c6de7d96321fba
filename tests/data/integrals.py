"""Writes integrals.csv: reference entries of the r-fold integration matrices, for tests/operators.rs.

    python3 integrals.py > integrals.csv        (Python 3, mpmath 1.3; a minute)

Made by another road than the crate's: nodes of rules.py (60 digits), the Lagrange polynomial as a product
over the nodes, its integral from -1 to s_i against (s_i - t)^(r-1) / (r-1)! by a Gauss rule long enough to be exact.

Columns: n (Lobatto nodes), r, row i, column j, entry.
"""
from mpmath import cos, factorial, fsum, mpf, nstr

from rules import gauss, lobatto

print("n,r,i,j,entry")
for n in (2, 3, 5, 16, 32, 64, 200):
    nodes = [-cos(lobatto(n, j)[0]) for j in range(n)]
    length = n // 2 + 3
    gauss_rule = [gauss(length, j) for j in range(length)]
    picks = sorted({j for j in (0, 1, 2, n // 4, n // 2, n - 2, n - 1) if 0 <= j < n})
    for i in picks[1:]:
        half = (nodes[i] + 1) / 2
        points = [(half * (1 - cos(angle)) - 1, half * weight) for angle, weight in gauss_rule]
        for j in picks:
            basis = []
            for t, _ in points:
                product = mpf(1)
                for k in range(n):
                    if k != j:
                        product *= (t - nodes[k]) / (nodes[j] - nodes[k])
                basis.append(product)
            for r in (1, 2, 3, 4):
                kernel = lambda t: (nodes[i] - t) ** (r - 1) / factorial(r - 1)
                entry = fsum(w * kernel(t) * b for (t, w), b in zip(points, basis))
                print(n, r, i, j, nstr(entry, 20, strip_zeros=False), sep=",", flush=True)
