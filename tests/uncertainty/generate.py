"""Writes expressions.toml: random expressions with their values and standard uncertainties.

They come from `uncertainties` 3.2.3 (E. O. Lebigot), a general-purpose package for first-order propagation with correlation;
numpy is needed for its covariance matrices.

    python -m venv venv && venv/bin/pip install uncertainties==3.2.3 numpy
    venv/bin/python tests/uncertainty/generate.py > tests/uncertainty/expressions.toml
"""

import math
import random

import numpy
import uncertainties
from uncertainties import umath

N_GROUPS = 24
N_INPUTS = 6
N_EXPRESSIONS = 10
DEPTH = 5
# Arguments stay inside these, so that no rounding is magnified out of proportion.
SMALLEST, LARGEST = 0.1, 50.0

FUNCTIONS = {
    "sqrt": umath.sqrt,
    "ln": umath.log,
    "log10": umath.log10,
    "exp": umath.exp,
    "exp10": lambda x: 10**x,
}


class Expression:
    """A value with the texts it is written as, in scripts and in reverse Polish notation."""

    def __init__(self, value, script, postfix):
        self.value, self.script, self.postfix = value, script, postfix

    @property
    def size(self):
        return abs(nominal(self.value))


def nominal(value):
    return getattr(value, "nominal_value", value)


def sigma(value):
    return getattr(value, "std_dev", 0.0)


def moderate(value):
    return SMALLEST <= abs(nominal(value)) <= LARGEST


def leaf(inputs, numbers):
    if numbers.random() < 0.8:
        k = numbers.randrange(N_INPUTS)
        return Expression(inputs[k], f"x{k}", f"x{k}")
    number = round(numbers.uniform(0.5, 3.0), 2)
    return Expression(number, repr(number), repr(number))


def operation(a, b, sign):
    value = {
        "+": lambda: a.value + b.value,
        "-": lambda: a.value - b.value,
        "*": lambda: a.value * b.value,
        "/": lambda: a.value / b.value,
    }[sign]()
    return Expression(value, f"({a.script} {sign} {b.script})", f"{a.postfix} {b.postfix} {sign}")


def power(a, numbers):
    exponent = numbers.choice([-2, -1, 2, 3, 0.5, -1.5, 1.25])
    if nominal(a.value) < 0 and exponent != int(exponent):
        return None
    return Expression(a.value**exponent, f"pow({a.script}, {exponent})", f"{a.postfix} {exponent} pow")


def function(a, numbers):
    name = numbers.choice(sorted(FUNCTIONS))
    value = nominal(a.value)
    if value <= 0 and name in ("sqrt", "ln", "log10") or value > 3 and name.startswith("exp"):
        return None
    return Expression(FUNCTIONS[name](a.value), f"{name}({a.script})", f"{a.postfix} {name}")


def expression(inputs, numbers, depth):
    """A random expression whose every part is of moderate size."""
    while True:
        if depth == 0 or numbers.random() < 0.1:
            made = leaf(inputs, numbers)
        elif numbers.random() < 0.65:
            a, b = (expression(inputs, numbers, depth - 1) for _ in range(2))
            made = operation(a, b, numbers.choice("+-*/"))
        else:
            a = expression(inputs, numbers, depth - 1)
            made = (power if numbers.random() < 0.4 else function)(a, numbers)
        if made is not None and moderate(made.value):
            return made


def correlation_matrix(numbers):
    """A random correlation matrix: that of N_INPUTS mixtures of as many independent numbers."""
    mixtures = [[numbers.gauss(0, 1) for _ in range(N_INPUTS)] for _ in range(N_INPUTS)]
    length = [math.sqrt(sum(x * x for x in row)) for row in mixtures]
    product = lambda i, j: sum(a * b for a, b in zip(mixtures[i], mixtures[j]))
    # Rounded so that the text says all of it; ones on the diagonal.
    return [
        [1.0 if i == j else round(0.9 * product(i, j) / (length[i] * length[j]), 3) for j in range(N_INPUTS)]
        for i in range(N_INPUTS)
    ]


def main():
    numbers = random.Random(1995)
    print(f"# Made by generate.py with uncertainties {uncertainties.__version__} and numpy {numpy.__version__}; not edited.")
    for group in range(N_GROUPS):
        values = [round(numbers.uniform(0.3, 3.0), 4) for _ in range(N_INPUTS)]
        sigmas = [round(numbers.uniform(0.001, 0.1), 5) for _ in range(N_INPUTS)]
        correlated = group % 2 == 1
        print(f"\n[[group]]\nvalues = {values}\nsigmas = {sigmas}")
        if correlated:
            matrix = correlation_matrix(numbers)
            print(f"correlation = {matrix}")
            inputs = uncertainties.correlated_values_norm(list(zip(values, sigmas)), matrix)
        else:
            inputs = [uncertainties.ufloat(v, s) for v, s in zip(values, sigmas)]
        written = 0
        while written < N_EXPRESSIONS:
            made = expression(inputs, numbers, DEPTH)
            if made.postfix.count(" ") < 6 or sigma(made.value) == 0.0:
                continue
            print(f"\n[[group.expression]]\nscript = \"{made.script}\"\npostfix = \"{made.postfix}\"")
            print(f"value = {nominal(made.value)!r}\nsigma = {float(sigma(made.value))!r}")
            written += 1


main()
