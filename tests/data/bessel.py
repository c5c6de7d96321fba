"""Prints the constants of src/legendre/bessel.rs (Python 3, mpmath 1.3).

Zeros j of J_0 and J_1 by mpmath's own search, split into two doubles, and 2 / (pi j J'(j)^2) - 1; then the
coefficients of McMahon's expansion, from the phase of the Bessel functions: theta' = 1/S with
S = sum_k prod_(i<=k) (2i-1)/(2i) (mu - (2i-1)^2) / (2x)^(2k) (NIST DLMF 10.18.17), theta integrated and inverted
in exact fractions.
"""
from fractions import Fraction

from mpmath import besselj, besseljzero, mp, mpf, nstr, pi

mp.dps = 50


def mcmahon(mu, terms):
    """x = b + sum_i h_i / b^(2i+1), the solution of x + sum_i g_i / x^(2i+1) = b"""
    length = terms + 1
    s = [Fraction(1)]
    for i in range(1, length):
        s.append(s[-1] * Fraction(2 * i - 1, 2 * i) * (mu - (2 * i - 1) ** 2) / 4)
    inverse = [Fraction(1)]
    for k in range(1, length):
        inverse.append(-sum(s[i] * inverse[k - i] for i in range(1, k + 1)))
    # x^(-2k) integrates to -x^(1-2k) / (2k-1)
    g = [-inverse[i + 1] / (2 * i + 1) for i in range(terms)]

    # In y = 1/b^2: x = b X, X = 1 - sum_i g_i y^(i+1) X^(-2i-1), by repeated substitution.
    def times(p, q):
        return [sum(p[i] * q[k - i] for i in range(k + 1)) for k in range(length)]

    def reciprocal(p):
        r = [1 / p[0]]
        for k in range(1, length):
            r.append(-sum(p[i] * r[k - i] for i in range(1, k + 1)) / p[0])
        return r

    x = [Fraction(1)] + [Fraction(0)] * terms
    for _ in range(length):
        inverse = reciprocal(x)
        square = times(inverse, inverse)
        power, new = inverse, [Fraction(1)] + [Fraction(0)] * terms
        for i in range(terms):
            for k in range(length - i - 1):
                new[k + i + 1] -= g[i] * power[k]
            power = times(power, square)
        x = new
    return x[1:]


for order in (0, 1):
    print(f"// zeros of J_{order}: hi, lo, 2 / (pi j J'(j)^2) - 1")
    for k in range(1, 13):
        j = besseljzero(order, k)
        hi = float(j)
        lo = float(j - mpf(hi))
        slope = besselj(1 - order, j)
        sigma = float(2 / (pi * j * slope**2) - 1)
        print(f"({hi!r}, {lo!r}, {sigma!r}),")
    h = mcmahon(Fraction(4 * order * order), 7)
    print("// McMahon:", ", ".join(str(c) for c in h))
    print("//", ", ".join(repr(float(c)) for c in h))
    b = (mpf(13) + mpf(order) / 2 - mpf(1) / 4) * pi
    value = b + sum(mpf(c.numerator) / c.denominator / b ** (2 * i + 1) for i, c in enumerate(h))
    print("// error at the 13th zero:", nstr(value - besseljzero(order, 13), 5))
