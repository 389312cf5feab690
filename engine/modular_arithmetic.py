"""Arithmetic modulo word-sized primes: the primes, polynomials over them, and the way back to the integers."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from functools import cache
from itertools import zip_longest
from math import prod

# Products of two residues stay below 2^62, so they fit a signed 64-bit integer.
PRIME_LIMIT = 2**31


def primes() -> Iterator[int]:
    """The primes below 2^31, largest first."""
    prime = PRIME_LIMIT
    while True:
        prime = _prime_below(prime)
        yield prime


@cache
def _prime_below(limit: int) -> int:
    """The largest prime below ``limit`` (odd primes only)."""
    candidate = (limit - 2) | 1
    while not _is_prime(candidate):
        candidate -= 2
    return candidate


def _is_prime(n: int) -> bool:
    """Miller-Rabin with bases 2, 3, 5, 7: exact for odd 7 < n < 3,215,031,751 (Pomerance, Selfridge, Wagstaff 1980)."""
    twos = ((n - 1) & (1 - n)).bit_length() - 1
    return all(_is_strong_probable_prime(n, base, twos) for base in (2, 3, 5, 7))


def _is_strong_probable_prime(n: int, base: int, twos: int) -> bool:
    power = pow(base, (n - 1) >> twos, n)
    if power in (1, n - 1):
        return True
    for _ in range(twos - 1):
        power = power * power % n
        if power == n - 1:
            return True
    return False


def polynomial_gcd_modulo(a: Sequence[int], b: Sequence[int], prime: int) -> list[int]:
    """The monic greatest common divisor of two polynomials (ascending integers) over the integers modulo ``prime``."""
    first, second = _residues(a, prime), _residues(b, prime)
    while second:
        second = _monic(second, prime)
        first, second = second, _remainder(first, second, prime)
    return _monic(first, prime)


def chinese_remainder(residues: Sequence[Sequence[int]], moduli: Sequence[int]) -> list[int]:
    """Integers x_k, least in absolute value, with x_k = residues[i][k] modulo the prime moduli[i] for every i."""
    modulus = prod(moduli)
    basis = [modulus // p * pow(modulus // p, -1, p) for p in moduli]
    columns = zip_longest(*residues, fillvalue=0)
    values = (sum(map(int.__mul__, basis, column)) % modulus for column in columns)
    return [value - modulus if 2 * value > modulus else value for value in values]


def _residues(coefficients: Sequence[int], prime: int) -> list[int]:
    return _trimmed([c % prime for c in coefficients])


def _trimmed(coefficients: list[int]) -> list[int]:
    while coefficients and not coefficients[-1]:
        coefficients.pop()
    return coefficients


def _monic(coefficients: list[int], prime: int) -> list[int]:
    if not coefficients or coefficients[-1] == 1:
        return coefficients
    inverse = pow(coefficients[-1], -1, prime)
    return [c * inverse % prime for c in coefficients]


def _remainder(dividend: list[int], monic_divisor: list[int], prime: int) -> list[int]:
    remainder, size = dividend, len(monic_divisor)
    while len(remainder) >= size:
        lead, low = remainder[-1], len(remainder) - size
        tail = [(c - lead * d) % prime for c, d in zip(remainder[low:-1], monic_divisor, strict=False)]
        remainder = _trimmed(remainder[:low] + tail)
    return remainder
