"""Factors by which poles can be hidden: a gcd-free basis of all denominators that are not clearly Hurwitz.

A pole of one block that a zero of another cancels, or an integrator whose pole no feedback moves, shows as a
polynomial factor common to all terms of a determinant. To see it, such factors must stand as factors of their own in
every block: coincidence is exact equality of roots, found by exact greatest common divisors.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from encircle.engine.coprime_factors import S
from encircle.engine.polynomial import Polynomial
from encircle.engine.transfer_function import TransferFunction

CLEARLY_STABLE = 1e-3  # roots with Re s < -this * |s| are left alone: they can neither be unstable nor lie on the axis

FactorList = tuple[tuple[Polynomial, int], ...]


def split_shared_factors(
    transfers: Mapping[str, TransferFunction],
) -> tuple[dict[str, TransferFunction], tuple[Polynomial, ...]]:
    """The same transfer functions with shared factors split off, and those factors (s always among them)."""
    basis: list[Polynomial] = []
    for transfer in transfers.values():
        for factor, _ in transfer.denominator:
            if not _clearly_stable(factor):
                for square_free in _square_free_parts(factor):
                    _insert(basis, square_free)
    if basis:
        _refine(basis, (f for t in transfers.values() for f, _ in (*t.numerator, *t.denominator)))
    split = {
        name: replace(t, numerator=_split(t.numerator, basis), denominator=_split(t.denominator, basis))
        for name, t in transfers.items()
    }
    return split, (S, *basis)


def _clearly_stable(factor: Polynomial) -> bool:
    """A numerical hint only: no count rests on it."""
    roots = factor.roots()
    return bool((roots.real < -CLEARLY_STABLE * abs(roots)).all())


def _square_free_parts(factor: Polynomial) -> list[Polynomial]:
    return [part for part, _ in factor.square_free_factors()]


def _insert(basis: list[Polynomial], candidate: Polynomial) -> None:
    """Add a polynomial to a list of pairwise coprime ones, splitting where needed."""
    for i, present in enumerate(basis):
        if present == candidate:
            return
        shared = present.gcd(candidate)
        if shared.degree > 0:
            del basis[i]
            for part in (shared, divmod(present, shared)[0], divmod(candidate, shared)[0]):
                if part.degree > 0:
                    _insert(basis, part.monic())
            return
    basis.append(candidate)


def _refine(basis: list[Polynomial], others: Iterable[Polynomial]) -> None:
    for other in dict.fromkeys(others):
        for present in list(basis):
            shared = present.gcd(other)
            if 0 < shared.degree < present.degree:
                _insert(basis, shared)


def _split(factors: FactorList, basis: Iterable[Polynomial]) -> FactorList:
    """Divide each factor by the members of the basis as often as they go in."""
    powers: dict[Polynomial, int] = {}
    for factor, power in factors:
        for member in basis:
            while factor.degree >= member.degree:
                quotient, rest = divmod(factor, member)
                if rest.degree >= 0:
                    break
                factor = quotient.monic()
                powers[member] = powers.get(member, 0) + power
        if factor.degree > 0:
            powers[factor] = powers.get(factor, 0) + power
    return tuple(powers.items())
