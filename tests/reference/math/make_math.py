"""Writes the reference values of the portable mathematics beside this file.

    python3 -m pip install mpmath
    python3 make_math.py

Arguments are random and adversarial f64 numbers (fixed seed). A value is computed at 200 bits or more and given as 25
digits, as the nearest f64, and as what the nearest f64 lacks, in units in the last place of that f64.
"""

import csv
import math
import pathlib
import random

import mpmath
from mpmath import mpf

mpmath.mp.prec = 200
POINTS = 400
draw = random.Random(20111213)


def log_uniform(low, high):
    return 10 ** draw.uniform(low, high)


def divided_difference(points):
    """(-1)^n times the n-th divided difference of exp(-u); equal points are set 2^-230 apart, at 1,400 bits."""
    with mpmath.workprec(1400):
        nodes = [mpf(point) + i * mpf(2) ** -230 for i, point in enumerate(sorted(points))]
        column = [mpmath.exp(-node) for node in nodes]
        for order in range(1, len(nodes)):
            column = [
                (column[i] - column[i + 1]) / (nodes[i + order] - nodes[i]) for i in range(len(column) - 1)
            ]
        return column[0]


def convolved(*arguments):
    *rates, h = map(mpf, arguments)
    return h ** (len(rates) - 1) * divided_difference([rate * h for rate in rates])


def cdf(x):
    return mpmath.erfc(-mpf(x) / mpmath.sqrt(2)) / 2


def quantile(u):
    u = mpf(u)
    if u > 0.5:
        return -quantile(1 - u)
    x = -mpmath.sqrt(-2 * mpmath.log(u)) if u < 0.01 else -mpmath.sqrt(2 * mpmath.pi) * (0.5 - u)
    for _ in range(100):  # Newton on the logarithm, which is concave
        p = cdf(x)
        step = (mpmath.log(p) - mpmath.log(u)) * p / mpmath.npdf(x)
        x -= step
        if abs(step) <= abs(x) * mpf(2) ** -120:
            return x
    raise ArithmeticError(u)


def near(x):
    return draw.choice([x, x * (1 + draw.random() * log_uniform(-16, 0)), x + log_uniform(-17, 2)])


def spread(count, edge):
    """Sorted nonnegative arguments: apart, near each other, about the edge of the series."""
    kind = draw.randrange(4)
    if kind == 0:
        values = [log_uniform(-10, 2.5) for _ in range(count)]
    elif kind == 1:
        top = edge * draw.uniform(0.98, 1.02)
        values = [draw.choice([0.0, top, draw.uniform(0, top)]) for _ in range(count - 1)] + [top]
    elif kind == 2:
        base = log_uniform(-6, 2)
        values = [near(base) for _ in range(count)]
    else:
        values = [draw.uniform(0, 2 * edge) for _ in range(count)]
    return sorted(values)


def rates(count):
    first = log_uniform(-3, 1)
    return [first] + [near(first) for _ in range(count - 1)] + [draw.uniform(0, 30)]


def any_of(*makers):
    return lambda: draw.choice(makers)()


decays = any_of(
    lambda: [log_uniform(-18, 2.8)],
    lambda: [draw.uniform(0, 3)],
    lambda: [draw.uniform(0.3, 0.36)],
    lambda: [draw.uniform(1.0, 1.05)],
)
FUNCTIONS = {
    "exp": (lambda x: mpmath.exp(mpf(x)), any_of(
        lambda: [draw.uniform(-1, 1) * log_uniform(-18, 0)],
        lambda: [draw.uniform(-40, 1)],
        lambda: [draw.uniform(-745, 709.7)],
        lambda: [(draw.randrange(-20, 20) + 0.5) * math.log(2) * (1 + draw.uniform(-1, 1) * 1e-15)],
    )),
    "ln": (lambda x: mpmath.log(mpf(x)), any_of(
        lambda: [1 + draw.uniform(-1, 1) * log_uniform(-15, -0.4)],
        lambda: [log_uniform(-307, 308)],
        lambda: [math.sqrt(0.5) * 2.0 ** draw.randrange(-3, 3) * (1 + draw.uniform(-1, 1) * 1e-14)],
        lambda: [log_uniform(-323, -308)],
    )),
    "lost": (lambda x: -mpmath.expm1(-mpf(x)), decays),
    "falling1": (lambda x: -mpmath.expm1(-mpf(x)) / mpf(x), decays),
    "falling2": (lambda *u: divided_difference([0, *u]), lambda: spread(2, 2.0)),
    "falling3": (lambda *u: divided_difference([0, *u]), lambda: spread(3, 3.0)),
    "convolved2": (convolved, lambda: rates(2)),
    "convolved3": (convolved, lambda: rates(3)),
    "convolved4": (convolved, lambda: rates(4)),
    "normal_quantile": (quantile, any_of(
        lambda: [draw.uniform(0.01, 0.99)],
        lambda: [0.5 + draw.uniform(-1, 1) * log_uniform(-16, -0.35)],
        lambda: [draw.choice([1, -1]) * draw.uniform(0.42, 0.43) + 0.5],
        lambda: [log_uniform(-300, -0.31)],
        lambda: [1 - log_uniform(-15.6, -0.31)],
    )),
    "normal_cdf": (cdf, any_of(
        lambda: [draw.uniform(-37, 8)],
        lambda: [draw.uniform(-3, 3)],
        lambda: [draw.uniform(-1, 1) * log_uniform(-17, 0)],
    )),
}


def last_place(value):
    return mpf(2) ** max(math.frexp(value)[1] - 53, -1074)


here = pathlib.Path(__file__).parent
for name, (function, arguments) in FUNCTIONS.items():
    points = sorted(arguments() for _ in range(POINTS))
    with open(here / f"{name}.csv", "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow([*"xyzuv"[: len(points[0])], "value_25_digits", "nearest", "rest_in_ulp"])
        for point in points:
            value = function(*point)
            nearest = float(value)
            rest = float((value - mpf(nearest)) / last_place(nearest)) if nearest else 0.0
            writer.writerow([*map(repr, point), mpmath.nstr(value, 25), repr(nearest), f"{rest:.4f}"])
