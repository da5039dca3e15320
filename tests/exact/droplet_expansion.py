"""Droplets expanded in monomials with integers: exact occupations of orbitals and of relative angular momenta.

The orbitals z^k exp(-|z|^2/4) are orthogonal with norms 2^k k!, so everything is a rational number. None of this knows
the package under test.
"""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterator
from fractions import Fraction
from functools import cache
from math import comb, factorial, prod

Powers = tuple[int, ...]
Polynomial = Counter[Powers]


def _pairings(electrons: tuple[int, ...]) -> Iterator[tuple[int, frozenset[tuple[int, int]]]]:
    """Sign and pairs of every way to pair all electrons."""
    if not electrons:
        yield 1, frozenset()
        return
    first, rest = electrons[0], electrons[1:]
    for place, partner in enumerate(rest):
        for sign, pairs in _pairings(rest[:place] + rest[place + 1 :]):
            yield (-1) ** place * sign, pairs | {(first, partner)}


def _jastrow(n_electrons: int, exponents: dict[tuple[int, int], int]) -> Polynomial:
    """prod_{i<j} (z_i - z_j)^exponents[i, j]."""
    polynomial = Counter({(0,) * n_electrons: 1})
    for (i, j), exponent in exponents.items():
        factor = Counter()
        for powers, coefficient in polynomial.items():
            for k in range(exponent + 1):
                raised = list(powers)
                raised[i] += exponent - k
                raised[j] += k
                factor[tuple(raised)] += (-1) ** k * comb(exponent, k) * coefficient
        polynomial = factor
    return polynomial


@cache
def droplet(kind: str, exponent: int, n_electrons: int) -> Polynomial:
    """Laughlin droplet, or Moore-Read droplet as the sum over pairings."""
    pairs = [(i, j) for j in range(n_electrons) for i in range(j)]
    if kind == "laughlin":
        return _jastrow(n_electrons, dict.fromkeys(pairs, exponent))
    total: Polynomial = Counter()
    for sign, paired in _pairings(tuple(range(n_electrons))):
        for powers, coefficient in _jastrow(n_electrons, {p: exponent - (p in paired) for p in pairs}).items():
            total[powers] += sign * coefficient
    return total


def orbital_occupations(polynomial: Polynomial) -> list[Fraction]:
    """n_k, k = 0, 1, ..."""
    numbers: Counter[int] = Counter()
    total = 0
    for powers, coefficient in polynomial.items():
        weight = coefficient**2 * prod(factorial(k) for k in powers)
        total += weight
        for k in powers:
            numbers[k] += weight
    return [Fraction(numbers[k], total) for k in range(max(numbers) + 1)]


def pair_probabilities(polynomial: Polynomial) -> dict[int, Fraction]:
    """w_l of the relative angular momentum of the first two electrons.

    With u, v = (z_1 -+ z_2)/sqrt 2 the monomial z_1^a z_2^b is 2^(-(a+b)/2) (v + u)^a (v - u)^b, and u^l v^(a+b-l)
    has the norm l! (a+b-l)!, powers of two being the same for all.
    """
    grouped: defaultdict[tuple[Powers, int, int], int] = defaultdict(int)
    for (a, b, *rest), coefficient in polynomial.items():
        for l in range(a + b + 1):  # noqa: E741
            turned = sum((-1) ** (l - i) * comb(a, i) * comb(b, l - i) for i in range(max(0, l - b), min(a, l) + 1))
            grouped[tuple(rest), a + b, l] += coefficient * turned
    weights: defaultdict[int, Fraction] = defaultdict(Fraction)
    for (rest, degree, l), value in grouped.items():  # noqa: E741
        norm = prod(factorial(k) for k in rest) * factorial(l) * factorial(degree - l)
        weights[l] += Fraction(value**2 * norm, 2**degree)
    total = sum(weights.values())
    return {momentum: weight / total for momentum, weight in sorted(weights.items()) if weight}
