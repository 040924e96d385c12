"""Write the oracle table of the Voigt function: w(x + iy) = exp(-z^2) erfc(-iz) and dw/dz from 50-digit arithmetic.

Usage: python make_table.py > table.csv

The points are drawn with a fixed seed: log-uniform over the whole domain, stratified over the core, and dense around the borders
where a rule hands over to the next one, with y = 0 and tiny y among them. x and y are written exactly (17 digits) and the function is
computed for those doubles; each component is rounded once.
"""

import random

import mpmath as mp

mp.mp.dps = 50
BORDERS = (6.25, 7.5, 7.65, 9.7, 12.5, 22.5, 60.0, 80.0, 4000.0)


def w(x, y):
    """The function at 50 good digits: the exact doubles go in, and cancellation is met with more digits."""
    z = mp.mpc(mp.mpf(x), mp.mpf(y))
    if abs(z) < 60:
        # exp(-z^2) erfc(-iz) loses digits to the size of exp(-z^2), and the small real part more.
        with mp.workdps(50 + int(abs(z) ** 2 / 2) + 30):
            value = mp.exp(-z * z) * mp.erfc(-1j * z)
            return +value.real, +value.imag
    # Asymptotic series: beyond |z| = 60 its terms fall below 1e-60 before they rise.
    with mp.workdps(80):
        total, term, k = mp.mpc(1), mp.mpc(1), 0
        while abs(term) > mp.mpf(10) ** -70:
            term *= (2 * k + 1) / (2 * z * z)
            total += term
            k += 1
        value = 1j * total / (mp.sqrt(mp.pi) * z)
        # On the real axis the series knows nothing of exp(-x^2).
        gauss = mp.exp(-z * z) if y < 1 else mp.mpc(0)
        return +(value.real + gauss.real), +value.imag


def points():
    draw = random.Random(20240229)

    def sign():
        return draw.choice((-1.0, 1.0))

    for _ in range(700):
        yield sign() * 10 ** draw.uniform(-8, 4), 10 ** draw.uniform(-8, 3)
    for k in range(700):
        yield sign() * 8 * (k + draw.random()) / 700, 10 ** draw.uniform(-8, 0.9)
    for border in BORDERS:
        for _ in range(60):
            radius = border * (1 + draw.choice((-1, 1)) * 10 ** draw.uniform(-9, -1))
            angle = 10 ** draw.uniform(-9, 0.19)
            y = min(max(radius * float(mp.sin(angle)), 1e-8), 1e3)
            yield sign() * radius * float(mp.cos(angle)), y
    for border in (3.5, 4.0, 4.75, 5.9, 6.3):
        for _ in range(30):
            yield sign() * draw.uniform(0, 8), border * (1 + draw.choice((-1, 1)) * 10 ** draw.uniform(-9, -2))
    for k in range(200):
        yield sign() * 26.6 * (k + draw.random()) / 200, 0.0
    for _ in range(60):
        yield sign() * 10 ** draw.uniform(-8, 1.42), 0.0
    for y in (1e-300, 1e-100, 1e-30, 1e-20, 1e-15, 1e-12, 1e-10, 3e-9):
        for _ in range(20):
            yield sign() * draw.uniform(0, 26), y
    for _ in range(150):
        # Where the Gaussian and the damping wing of an almost undamped line are of one size.
        yield sign() * draw.uniform(6, 9), 10 ** draw.uniform(-20, -8)
    for _ in range(80):
        yield 0.0, 10 ** draw.uniform(-8, 3)
    for k in range(40):
        # The nodes of the rules, and the points half-way between two of them.
        for step in (0.5, 0.53125, 0.75):
            x = 0.25 * k * step
            if x < 8:
                yield x, 10 ** draw.uniform(-8, -1)


def main():
    print("# w(x + iy) = exp(-z^2) erfc(-iz); written by make_table.py with mpmath, 50 digits")
    print("x,y,re,im,slope_re,slope_im")
    for x, y in points():
        re, im = w(x, y)
        slope = -2 * mp.mpc(x, y) * mp.mpc(re, im) + 2j / mp.sqrt(mp.pi)
        numbers = (mp.nstr(value, 17) for value in (re, im, slope.real, slope.imag))
        print(f"{x!r},{y!r},{','.join(numbers)}")


if __name__ == "__main__":
    main()
