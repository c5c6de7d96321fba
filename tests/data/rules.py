"""Writes rules.csv: reference nodes and weights of quadrature rules, 25 digits, for tests/rules.rs.

    python3 rules.py > rules.csv        (Python 3, mpmath 1.3; most of an hour)

Made by another road than the crate's: mpmath with 60 digits, the plain three-term recurrence in x,
Newton's iteration from equidistant angles and the textbook weights. Rules up to 1000 nodes are computed
whole and their weights must add up to 2 to 40 digits, which no missed or doubled node survives; written are
all nodes of the left half of small rules and a selection of larger ones. From 1000 nodes on only the
selection is computed.

Columns: rule, n, index from the left counted from 0, angle theta (s = -cos theta), 1 + s, weight.
"""
from mpmath import mp, mpf, cos, sin, pi, nstr, fsum

mp.dps = 60


def legendre(n, x):
    """P_n(x), P_(n-1)(x)"""
    before, here = mpf(0), mpf(1)
    for k in range(n):
        before, here = here, ((2 * k + 1) * x * here - k * before) / (k + 1)
    return here, before


def zero(angle, function):
    """Newton on function(x) -> (value, derivative by x), in the angle, x = -cos(angle)"""
    for _ in range(100):
        value, slope = function(-cos(angle))
        step = value / (slope * sin(angle))
        angle -= step
        if abs(step) < mpf(10) ** -45 * angle:
            return angle
    raise ArithmeticError("no convergence")


def gauss(n, j):
    def function(x):
        p, q = legendre(n, x)
        return p, n * (q - x * p) / (1 - x * x)

    angle = zero(pi * (j + mpf(3) / 4) / (n + mpf(1) / 2), function)
    x = -cos(angle)
    slope = function(x)[1]
    return angle, 2 / ((1 - x * x) * slope**2)


def lobatto(n, j):
    m = n - 1
    if j in (0, m):
        return pi * (j // m), mpf(2) / (n * m)

    def function(x):
        p, q = legendre(m, x)
        slope = m * (q - x * p) / (1 - x * x)
        return slope, (2 * x * slope - m * n * p) / (1 - x * x)

    angle = zero(pi * (j + mpf(1) / 4) / (m + mpf(1) / 2), function)
    return angle, mpf(2) / (n * m * legendre(m, -cos(angle))[0] ** 2)


def radau(n, j):
    """left end fixed"""
    if j == 0:
        return mpf(0), mpf(2) / n**2

    def function(x):
        p, q = legendre(n, x)
        square = 1 - x * x
        return p + q, n * (q - x * p) / square + n * (x * q - p) / square

    angle = zero(pi * (j + mpf(1) / 4) / n, function)
    x = -cos(angle)
    return angle, (1 - x) / (n * legendre(n, x)[1]) ** 2


def selection(n, symmetric):
    top = (n + 1) // 2 if symmetric else n
    if n <= 17:
        return range(top)
    near_left = [0, 1, 2, 3, 4, 7, 12, 20, 35, 60, 100]
    inner = [n // 8, n // 4, n // 3, 2 * n // 5, n // 2 - 1, n // 2]
    right = [] if symmetric else [n - 1 - j for j in near_left + [n // 4, n // 3]]
    if n > 1000:
        near_left, right = [0, 1, 2, 7, 35], right and [n - 1, n - 2, n - 8, n - 36]
        inner = [n // 300, n // 30, n // 8, n // 3, n // 2 - 1]
    if n > 100_000:  # minutes each
        near_left, inner, right = [1, 7], [n // 300, n // 3], right and [n - 1, n - 8]
    return sorted({j for j in near_left + inner + right if 0 <= j < top})


def main():
    print("rule,n,index,theta,one_plus_s,weight")
    for n in (1, 2, 3, 4, 5, 7, 10, 16, 17, 32, 33, 64, 99, 100, 101, 200, 201, 500, 1000, 1001, 3000, 20000, 1_000_000):
        for rule in (gauss, lobatto, radau):
            if rule is lobatto and n < 2:
                continue
            chosen = selection(n, rule is not radau)
            rows = {j: rule(n, j) for j in (range(n) if n <= 1000 else chosen)}
            if n <= 1000:
                assert abs(fsum(w for _, w in rows.values()) - 2) < mpf(10) ** -40, (rule, n)
                assert all(rows[j][0] < rows[j + 1][0] for j in range(n - 1)), (rule, n)
            for j in chosen:
                theta, weight = rows[j]
                digits = (nstr(v, 25, strip_zeros=False) for v in (theta, 2 * sin(theta / 2) ** 2, weight))
                print(rule.__name__, n, j, *digits, sep=",", flush=True)


if __name__ == "__main__":
    main()
