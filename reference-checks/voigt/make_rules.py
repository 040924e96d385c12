"""Write the tables of the Voigt kernel: quadrature nodes and polynomials.

Usage: python make_rules.py > crates/forward/src/voigt/rules.rs

Everything is computed with mpmath in 50 digits and rounded once to double precision.
- Trapezoid: nodes t = k h and t = (k + 1/2) h, weights (2h/pi) exp(-t^2) (half of it at t = 0), for the integral of
  exp(-t^2) over the whole line folded on t >= 0 and divided by pi.
- Gauss-Hermite: the positive nodes of the even rules, weights 2 w / pi. The n-point rule for 1/(z - t) is the n-th
  convergent of the Laplace continued fraction of the function.
- Polynomials: interpolation at Chebyshev nodes, within a factor of two of the best possible ones.
"""

import mpmath as mp

mp.mp.dps = 50


def gauss_hermite(points):
    """Positive nodes of the rule with `points` nodes, each with its weight."""
    before, last = [mp.mpf(1)], [mp.mpf(2), mp.mpf(0)]
    for k in range(1, points):
        twice = [2 * c for c in last] + [mp.mpf(0)]
        older = [mp.mpf(0)] * 2 + [2 * k * c for c in before]
        before, last = last, [a - b for a, b in zip(twice, older)]
    roots = sorted(mp.re(t) for t in mp.polyroots(last, maxsteps=500, extraprec=300))
    scale = 2 ** (points - 1) * mp.factorial(points) * mp.sqrt(mp.pi) / points**2
    return [(t, scale / mp.polyval(before, t) ** 2) for t in roots if t > 0]


def chebyshev_polynomial(function, low, high, terms):
    """Monomial coefficients, constant first, of the interpolant at Chebyshev nodes."""
    mid, half = (mp.mpf(low) + high) / 2, (mp.mpf(high) - low) / 2
    nodes = [mid + half * mp.cos(mp.pi * (2 * k + 1) / (2 * terms)) for k in range(terms)]
    rows = mp.matrix([[x**j for j in range(terms)] for x in nodes])
    return list(mp.lu_solve(rows, mp.matrix([function(x) for x in nodes])))


def half_turn_sine(z):
    """sin(pi r / 2) / r for r = sqrt z"""
    r = mp.sqrt(z)
    return mp.sin(mp.pi * r / 2) / r if z > 0 else mp.pi / 2


def half_turn_cosine(z):
    """(1 - cos(pi r / 2)) / r^2 for r = sqrt z"""
    return (1 - mp.cos(mp.pi * mp.sqrt(z) / 2)) / z if z > 0 else mp.pi**2 / 8


def literal(value):
    text = repr(float(value))
    return text if "." in text or "e" in text else text + ".0"


def print_nodes(name, doc, nodes):
    print(f"\n/// {doc}")
    print(f"pub(super) const {name}: [Node; {len(nodes)}] = [")
    for t, weight in nodes:
        print(f"    Node {{ t_squared: {literal(t * t)}, inverse_weight: {literal(1 / weight)} }},")
    print("];")


def print_polynomial(name, doc, coefficients):
    print(f"\n/// {doc}")
    print(f"pub(super) const {name}: [f64; {len(coefficients)}] = [")
    for c in coefficients:
        print(f"    {literal(c)},")
    print("];")


def main():
    print("//! Nodes, weights and polynomials of the Voigt kernel.")
    print("//!")
    print("//! Written by `reference-checks/voigt/make_rules.py` from 50-digit arithmetic; change the script, not this file.")
    print("\n#![allow(clippy::approx_constant, clippy::excessive_precision, clippy::unreadable_literal)]")
    print("\nuse super::quadrature::Node;")
    for name, step, count in (("FULL", mp.mpf(33) / 64, 12), ("FAST", mp.mpf(3) / 4, 6)):
        for parity, shift in (("ON", mp.mpf(0)), ("BETWEEN", mp.mpf(1) / 2)):
            nodes = []
            for k in range(count):
                t = (k + shift) * step
                weight = 2 * step / mp.pi * mp.exp(-t * t)
                nodes.append((t, weight / 2 if t == 0 else weight))
            where = "multiples of the step" if parity == "ON" else "half-way between the multiples of the step"
            print_nodes(f"TRAPEZOID_{name}_{parity}", f"Trapezoid with step {step}, nodes {where}.", nodes)
    for points in (12, 8, 6, 4, 2):
        nodes = [(t, 2 * w / mp.pi) for t, w in gauss_hermite(points)]
        print_nodes(f"HERMITE_{points}", f"Gauss-Hermite rule with {points} points.", nodes)
    half, quarter = mp.mpf(1) / 2, mp.mpf(1) / 4
    for name, exp_terms, sin_terms, cos_terms in (("FULL", 11, 7, 6), ("FAST", 6, 4, 3)):
        for title, doc, function, low, high, terms in (
            ("EXP", "2^r on |r| <= 1/2.", lambda r: mp.power(2, r), -half, half, exp_terms),
            ("SIN", "sin(pi r/2)/r in powers of r², |r| <= 1/2.", half_turn_sine, 0, quarter, sin_terms),
            ("COS", "(1 - cos(pi r/2))/r² in powers of r², |r| <= 1/2.", half_turn_cosine, 0, quarter, cos_terms),
        ):
            print_polynomial(f"{title}_{name}", doc, chebyshev_polynomial(function, low, high, terms))


if __name__ == "__main__":
    main()
