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


def sine_series(z):
    """sin(sqrt z) / sqrt z"""
    return mp.sin(mp.sqrt(z)) / mp.sqrt(z) if z > 0 else mp.mpf(1)


def cosine_rest(z):
    """(1 - cos(sqrt z)) / z"""
    return (1 - mp.cos(mp.sqrt(z))) / z if z > 0 else mp.mpf(1) / 2


def literal(value):
    text = repr(float(value))
    return text if "." in text or "e" in text else text + ".0"


def print_nodes(name, doc, nodes):
    print(f"\n/// {doc}")
    print(f"pub(super) const {name}: [Node; {len(nodes)}] = [")
    for t, weight in nodes:
        fields = (literal(t * t), literal(weight), literal(weight * t * t))
        print("    Node { t_squared: %s, weight: %s, weight_t_squared: %s }," % fields)
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
    print("\n#![allow(clippy::excessive_precision, clippy::unreadable_literal)]")
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
    ln2_half, quarter_pi = mp.log(2) / 2, mp.pi / 4
    for name, exp_terms, sin_terms, cos_terms in (("FULL", 11, 7, 6), ("FAST", 6, 4, 3)):
        print_polynomial(f"EXP_{name}", "exp(r) on |r| <= ln(2)/2.", chebyshev_polynomial(mp.exp, -ln2_half, ln2_half, exp_terms))
        print_polynomial(f"SIN_{name}", "sin(r)/r in powers of r², |r| <= pi/4.", chebyshev_polynomial(sine_series, 0, quarter_pi**2, sin_terms))
        print_polynomial(f"COS_{name}", "(1 - cos r)/r² in powers of r², |r| <= pi/4.", chebyshev_polynomial(cosine_rest, 0, quarter_pi**2, cos_terms))


if __name__ == "__main__":
    main()
