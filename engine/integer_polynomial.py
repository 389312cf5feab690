"""Polynomials with integer coefficients as plain sequences, ascending powers: division and common divisors."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial, reduce
from math import gcd

from encircle.engine.modular_arithmetic import chinese_remainder, polynomial_gcd_modulo, primes


def primitive_part(coefficients: Sequence[int]) -> list[int]:
    """The same polynomial without its content, leading coefficient positive. The last coefficient must not be 0."""
    content = gcd(*coefficients)
    if coefficients[-1] < 0:
        content = -content
    return list(coefficients) if content == 1 else [c // content for c in coefficients]


def multiply(a: Sequence[int], b: Sequence[int]) -> list[int]:
    """The product; an empty sequence is the zero polynomial."""
    if not a or not b:
        return []
    product = [0] * (len(a) + len(b) - 1)
    for i, factor in enumerate(a):
        if factor:
            for j, c in enumerate(b, i):
                product[j] += factor * c
    return product


def exact_quotient(dividend: Sequence[int], divisor: Sequence[int]) -> list[int] | None:
    """dividend/divisor for a primitive divisor, None where it does not divide.

    By Gauss's lemma the quotient by a primitive divisor is integral.
    """
    remainder, size, lead = list(dividend), len(divisor), divisor[-1]
    quotient = [0] * (len(remainder) - size + 1)
    for low in range(len(quotient) - 1, -1, -1):
        ratio, rest = divmod(remainder[low + size - 1], lead)
        if rest:
            return None
        quotient[low] = ratio
        if ratio:
            for j, c in enumerate(divisor, low):
                remainder[j] -= ratio * c
    return quotient if not any(remainder) else None


def greatest_common_divisor(*polynomials: Sequence[int]) -> list[int]:
    """The primitive greatest common divisor of non-zero primitive polynomials.

    A common divisor keeps its degree modulo every prime that does not divide all leading coefficients, so one prime
    that shows degree 0 proves that there is none. Otherwise images modulo several primes are combined until the
    candidate divides every polynomial. Source: W. S. Brown, "On Euclid's algorithm and the computation of polynomial
    greatest common divisors", J. ACM 18 (1971), quoted from memory.
    """
    lead = gcd(*(polynomial[-1] for polynomial in polynomials))
    images: list[list[int]] = []
    moduli: list[int] = []
    wanted = 1
    for prime in primes():
        if lead % prime == 0:
            continue
        image = reduce(partial(polynomial_gcd_modulo, prime=prime), polynomials)
        if len(image) == 1:
            return [1]
        if images and len(image) != len(images[0]):
            if len(image) > len(images[0]):  # an unlucky prime; the other way round those before were
                continue
            images, moduli, wanted = [], [], 1
        images.append([c * lead % prime for c in image])
        moduli.append(prime)
        if len(images) == wanted:
            candidate = primitive_part(chinese_remainder(images, moduli))
            if all(exact_quotient(polynomial, candidate) for polynomial in polynomials):
                return candidate
            wanted *= 2
    raise AssertionError("the primes never end")
