"""A block as X = N/M with N and M analytic in Re s >= 0, M bounded and N and M without a common zero there.

M = d/n with the block's own denominator d and a Hurwitz polynomial n of the same degree that stands in for it:
sections of d that are stable and well damped stay as they are, the others are replaced by damped ones of the same
natural frequency. Any Hurwitz n is valid: it is a choice, not an approximation (M. Vidyasagar, "Control System
Synthesis: A Factorization Approach", MIT Press 1985; cited from memory). N and M are kept as products, factor by
factor, with integer exponents.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import factorial, sqrt

from encircle.engine.polynomial import Polynomial
from encircle.engine.transfer_function import TransferFunction

S = Polynomial((Fraction(0), Fraction(1)))
LEAST_KEPT_DAMPING = 0.25
SURROGATE_DAMPING = 0.75


@dataclass(frozen=True, slots=True)
class DelayKernel:
    """psi_k(T s) = k int_0^1 (1 - x)^(k-1) exp(-T s x) dx, k >= 1: entire, |psi_k| <= 1 in Re s >= 0, psi_k(0) = 1.

    exp(-T s) = sum_{m<k} (-T s)^m/m! + (-T s)^k/k! psi_k(T s): what is left of a delay when it cancels k poles at 0.
    """

    order: int
    delay: Fraction


@dataclass(frozen=True, slots=True)
class MeasuredFactor:
    """H(s) s^m of a measured block with m declared integrators: finite and nonzero at s = 0."""

    block: str


@dataclass(frozen=True, slots=True)
class IrrationalFactor:
    """An irrational formula without its power of s at 0 (``part`` "regular"), or a part of what stands in for a pole
    there ("shifted", "root").
    """

    block: str
    part: str


Factor = Polynomial | DelayKernel | MeasuredFactor | IrrationalFactor
Powers = Mapping[Factor, int]


@dataclass(frozen=True, slots=True)
class Product:
    """gain * prod(factor ** power) * exp(-delay s)."""

    gain: Fraction
    powers: Powers
    delay: Fraction


@dataclass(frozen=True, slots=True)
class CoprimeFactors:
    """X = N/M: ``numerator`` is a sum of products, ``denominator`` one product with gain 1 and no delay.

    ``numerator_at_infinity`` is the same N written without delay kernels, for bounds on |s| >= R.
    """

    numerator: tuple[Product, ...]
    numerator_at_infinity: tuple[Product, ...]
    denominator: Powers


def coprime_factors(transfer: TransferFunction, scale: float) -> CoprimeFactors:
    """Factor a rational block with dead time; ``scale`` (rad/s) places the zeros that stand in for poles at 0."""
    below: dict[Factor, int] = {}
    normaliser: dict[Factor, int] = {}
    for factor, power in _denominator(transfer).items():
        _raise(below, factor, power)
        for partner in hurwitz_stand_ins(factor, scale):
            _raise(normaliser, partner, power)
    common: dict[Factor, int] = dict(transfer.numerator)
    if _net_power(transfer) > 0 or transfer.unreduced_power:
        _raise(common, S, max(_net_power(transfer), 0) + transfer.unreduced_power)
    for stand_in, power in normaliser.items():
        _raise(common, stand_in, -power)
        _raise(below, stand_in, -power)
    numerator = tuple(_times(product, common) for product in _finite_elements(transfer))
    return CoprimeFactors(numerator, _elements_at_infinity(transfer, common), _clean(below))


def _net_power(transfer: TransferFunction) -> int:
    """The power of s that is left when the sum of delays has cancelled what it can."""
    return transfer.power + vanishing_order(transfer.delayed_sum)


def _denominator(transfer: TransferFunction) -> dict[Polynomial, int]:
    factors = dict(transfer.denominator)
    power = max(-_net_power(transfer), 0) + transfer.unreduced_power
    if power:
        factors[S] = factors.get(S, 0) + power
    return factors


def vanishing_order(delayed_sum: tuple[tuple[Fraction, Polynomial], ...]) -> int:
    """The order of the zero at s = 0 of sum n_i(s) exp(-T_i s), exactly; 0 for an empty sum (which stands for 1).

    The m-th Taylor coefficient is sum_i sum_j n_ij (-T_i)^(m-j)/(m-j)!. A nonzero sum of q terms with total degree D
    has a zero of order at most D + q - 1 (G. Polya, G. Szego, Problems and Theorems in Analysis II, part V, problem
    75, from memory), so the search ends.
    """
    order = 0
    while delayed_sum and _taylor_coefficient(delayed_sum, order) == 0:
        order += 1
    return order


def _taylor_coefficient(delayed_sum: tuple[tuple[Fraction, Polynomial], ...], m: int) -> Fraction:
    total = Fraction(0)
    for delay, polynomial in delayed_sum:
        for j, coefficient in enumerate(polynomial.coefficients[: m + 1]):
            total += coefficient * (-delay) ** (m - j) / factorial(m - j)
    return total


def _finite_elements(transfer: TransferFunction) -> list[Product]:
    """gain * exp(-delay s) * (sum of delays)/s^k as products that are analytic at 0."""
    if not transfer.delayed_sum:
        return [Product(transfer.gain, {}, transfer.delay)]
    k = vanishing_order(transfer.delayed_sum)
    elements = []
    for delay, polynomial in transfer.delayed_sum:
        if delay == 0 or k == 0:
            continue
        factor = transfer.gain * (-delay) ** k / factorial(k)
        elements.append(_element(factor, polynomial, transfer.delay, {DelayKernel(k, delay): 1}))
    if k == 0:
        return [_element(transfer.gain, n, transfer.delay + delay, {}) for delay, n in transfer.delayed_sum]
    rest = _polynomial_part(transfer.delayed_sum, k)
    if rest.degree >= 0:
        elements.append(_element(transfer.gain, rest, transfer.delay, {}))
    return elements


def _polynomial_part(delayed_sum: tuple[tuple[Fraction, Polynomial], ...], k: int) -> Polynomial:
    """(sum_i n_i(s) sum_{m<k} (-T_i s)^m/m!)/s^k: divisible because the whole sum vanishes to order k at 0."""
    total = Polynomial(())
    for delay, polynomial in delayed_sum:
        series = Polynomial(tuple((-delay) ** m / factorial(m) for m in range(k)) if delay else (Fraction(1),))
        total = total + polynomial * series
    return Polynomial(total.coefficients[k:])


def _element(gain: Fraction, polynomial: Polynomial, delay: Fraction, powers: Powers) -> Product:
    """A product with the polynomial made monic and its zeros at 0 taken out."""
    zeros = polynomial.order_at_zero()
    rest = Polynomial(polynomial.coefficients[zeros:])
    factors: dict[Factor, int] = dict(powers)
    if rest.degree > 0:
        factors[rest.monic()] = factors.get(rest.monic(), 0) + 1
    if zeros:
        factors[S] = zeros
    return Product(gain * rest.leading, factors, delay)


def _elements_at_infinity(transfer: TransferFunction, common: Powers) -> tuple[Product, ...]:
    if not transfer.delayed_sum:
        return (_times(Product(transfer.gain, {}, transfer.delay), common),)
    k = vanishing_order(transfer.delayed_sum)
    elements = (_element(transfer.gain, n, transfer.delay + delay, {}) for delay, n in transfer.delayed_sum)
    return tuple(_times(_times(element, common), {S: -k}) for element in elements)


def _times(product: Product, powers: Powers) -> Product:
    factors = dict(product.powers)
    for factor, power in powers.items():
        _raise(factors, factor, power)
    return Product(product.gain, _clean(factors), product.delay)


def _raise(powers: dict[Factor, int], factor: Factor, power: int) -> None:
    powers[factor] = powers.get(factor, 0) + power


def one_object_each(factors: Mapping[str, CoprimeFactors]) -> dict[str, CoprimeFactors]:
    """The same factors with equal ones made the same object: comparing exact polynomials is slow, identity is not."""
    seen: dict[Factor, Factor] = {}

    def shared(powers: Powers) -> dict[Factor, int]:
        return {seen.setdefault(factor, factor): power for factor, power in powers.items()}

    def each(products: tuple[Product, ...]) -> tuple[Product, ...]:
        return tuple(Product(p.gain, shared(p.powers), p.delay) for p in products)

    return {
        name: CoprimeFactors(each(f.numerator), each(f.numerator_at_infinity), shared(f.denominator))
        for name, f in factors.items()
    }


def _clean(powers: Powers) -> dict[Factor, int]:
    return {factor: power for factor, power in powers.items() if power}


def hurwitz_stand_ins(factor: Polynomial, scale: float) -> list[Polynomial]:
    """Hurwitz polynomials whose product has the degree of ``factor``; ``factor`` itself where it is well damped."""
    if factor == S:
        return [_first_order(scale)]
    if factor.degree == 1:
        root = factor.coefficients[0]
        return [factor] if root > 0 else [Polynomial((-root, Fraction(1)))]
    if factor.degree == 2:
        a0, a1 = factor.coefficients[0], factor.coefficients[1]
        if a0 > 0 and a1 > 0 and a1 * a1 >= (2 * Fraction(LEAST_KEPT_DAMPING)) ** 2 * a0:
            return [factor]
        return [_second_order(sqrt(abs(a0)))]
    return [_stand_in_of_root(root, scale) for root in factor.roots() if root.imag >= 0]


def _stand_in_of_root(root: complex, scale: float) -> Polynomial:
    magnitude = abs(root) or scale
    if root.imag == 0:
        return _first_order(magnitude)
    if -root.real >= LEAST_KEPT_DAMPING * magnitude:
        return Polynomial((Fraction(magnitude) ** 2, Fraction(-2 * root.real), Fraction(1)))
    return _second_order(magnitude)


def _first_order(corner: float) -> Polynomial:
    return Polynomial((Fraction(corner), Fraction(1)))


def _second_order(natural: float) -> Polynomial:
    return Polynomial((Fraction(natural) ** 2, Fraction(2 * SURROGATE_DAMPING * natural), Fraction(1)))
