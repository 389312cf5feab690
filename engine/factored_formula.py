"""Formulas in s as sums and products in which powers of s at s = 0 stand outside, ready for enclosure.

Every formula becomes a product  c s^p prod factor^n  with factors that are sums, principal powers of products, or
functions that are analytic where their argument is: exp x, (exp x - 1)/x, and with z = x^2 also cosh sqrt z, sinh(sqrt
z)/sqrt z and tanh(sqrt z)/sqrt z. sinh x is written x (sinh x/x), tanh x as x (tanh x/x): so the zero at x = 0 is a
factor, quotients such as tanh(x)/x lose it by cancellation of equal factors, and no cut of a root inside cosh remains;
sinh/cosh becomes tanh. All identities used hold for the principal branch at every s with Re s >= 0 where both sides are
defined: c^a u^a = (c u)^a for c > 0, (u^a)^n = u^(a n) for integer n, u^a u^b = u^(a+b), (u^a)^b = u^(a b) for |a| < 1.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal

from encircle.engine.expression import Call, Expression, FunctionName, Name, Negative, Number, Operation
from encircle.engine.real_interval import RealInterval

Analytic = Literal["exp", "exponential_quotient", "cosh_of_root", "sinhc_of_root", "tanhc_of_root"]


@dataclass(frozen=True, slots=True)
class Product:
    """coefficient * s^power * prod factor^n; two products with the same parts are equal.

    The product is s^order times a part that is regular at s = 0.
    """

    coefficient: RealInterval
    power: Fraction
    factors: tuple[tuple[Factor, Fraction], ...]
    order: Fraction = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        order = self.power + sum((n * factor.order for factor, n in self.factors), Fraction(0))
        object.__setattr__(self, "order", order)  # the one write to a frozen value, while it is made

    @property
    def is_constant(self) -> bool:
        return self.power == 0 and not self.factors

    @property
    def is_zero(self) -> bool:
        return self.coefficient.is_zero

    def times_power(self, coefficient: RealInterval, power: Fraction) -> Product:
        """The product times coefficient * s^power."""
        return Product(self.coefficient * coefficient, self.power + power, self.factors)


@dataclass(frozen=True, slots=True, eq=False)
class Sum:
    """A sum of at least two products, divided by the coefficient of its highest power and by its lowest power of s."""

    terms: tuple[Product, ...]
    order: Fraction


@dataclass(frozen=True, slots=True, eq=False)
class PrincipalPower:
    """base^exponent, principal branch, for an exponent that is no integer; the base's coefficient is 1 or -1."""

    base: Product
    exponent: Fraction
    order: Fraction


@dataclass(frozen=True, slots=True, eq=False)
class Function:
    """One of the analytic functions of its argument; 1 at s = 0 where the argument vanishes there."""

    name: Analytic
    argument: Product
    order: Fraction = Fraction(0)


Factor = Sum | PrincipalPower | Function

ZERO = Product(RealInterval.exact(0), Fraction(0), ())
S = Product(RealInterval.exact(1), Fraction(1), ())


def number(value: RealInterval) -> Product:
    """A constant as a product."""
    return Product(value, Fraction(0), ())


ONE = number(RealInterval.exact(1))


def times_power_of_s(product: Product, power: Fraction) -> Product:
    """s^power times the product."""
    return product.times_power(RealInterval.exact(1), power)


def shifted_power(a: Fraction, n: Fraction) -> Product:
    """(s + a)^n, a > 0, principal branch for fractional n."""
    shifted = Sum((S, number(RealInterval.exact(a))), Fraction(0))
    if n.denominator == 1:
        return Product(RealInterval.exact(1), Fraction(0), ((shifted, n),) if n else ())
    base = Product(RealInterval.exact(1), Fraction(0), ((shifted, Fraction(1)),))
    root = PrincipalPower(base, n, Fraction(0))
    return Product(RealInterval.exact(1), Fraction(0), ((root, Fraction(1)),))


def factored_formula(expression: Expression, parameters: Mapping[str, Fraction]) -> Product:
    """The formula as a product; ``parameters`` gives every name in it but ``s`` and ``pi``.

    Raises ZeroDivisionError, ValueError or OverflowError with a sentence for constants that divide by zero, are not
    real, or leave double precision.
    """
    return _Builder(parameters).product(expression)


class _Builder:
    """Keeps every factor once, so that equal factors are identical."""

    def __init__(self, parameters: Mapping[str, Fraction]) -> None:
        self._parameters = parameters
        self._kept: dict[object, Factor] = {}
        self._places: dict[Factor, int] = {}

    def product(self, expression: Expression) -> Product:
        match expression:
            case Number(value):
                return number(RealInterval.exact(value))
            case Name(name):
                return self._name(name)
            case Negative(operand):
                return self.product(operand).times_power(RealInterval.exact(-1), Fraction(0))
            case Operation(operator, left, right):
                return self._operation(operator, self.product(left), self.product(right))
            case Call(function, argument):
                return self._call(function, self.product(argument))

    def _name(self, name: str) -> Product:
        if name == "s":
            return S
        return number(RealInterval.pi() if name == "pi" else RealInterval.exact(self._parameters[name]))

    def _operation(self, operator: str, left: Product, right: Product) -> Product:
        match operator:
            case "+":
                return self.sum([left, right])
            case "-":
                return self.sum([left, right.times_power(RealInterval.exact(-1), Fraction(0))])
            case "*":
                return self.multiply([left, right])
            case "/":
                return self.multiply([left, self.power(right, Fraction(-1))])
        return self.power(left, _exponent(right))

    def _call(self, function: FunctionName, x: Product) -> Product:
        if x.is_constant:
            return number(x.coefficient.function(function))
        match function:
            case "exp":
                return self._function("exp", x)
            case "sqrt":
                return self.power(x, Fraction(1, 2))
            case "cosh":
                return self._function("cosh_of_root", self.power(x, Fraction(2)))
            case "sinh":
                return self.multiply([x, self._function("sinhc_of_root", self.power(x, Fraction(2)))])
            case "tanh":
                return self.multiply([x, self._function("tanhc_of_root", self.power(x, Fraction(2)))])

    def _function(self, name: Analytic, argument: Product) -> Product:
        if argument.is_zero:
            return ONE
        return self._single(self._keep((name, argument), Function(name, argument)))

    def _single(self, factor: Factor) -> Product:
        return Product(RealInterval.exact(1), Fraction(0), ((factor, Fraction(1)),))

    def _keep(self, key: object, factor: Factor) -> Factor:
        kept = self._kept.setdefault(key, factor)
        self._places.setdefault(kept, len(self._places))
        return kept

    def multiply(self, products: Iterable[Product]) -> Product:
        """The product of products: equal factors, equal bases of powers and exponentials are joined."""
        coefficient, power = RealInterval.exact(1), Fraction(0)
        plain: dict[Factor, Fraction] = {}
        roots: dict[Product, Fraction] = {}
        exponents: list[Product] = []
        for part in products:
            coefficient, power = coefficient * part.coefficient, power + part.power
            for factor, n in part.factors:
                if isinstance(factor, PrincipalPower):
                    roots[factor.base] = roots.get(factor.base, Fraction(0)) + n * factor.exponent
                elif isinstance(factor, Function) and factor.name == "exp":
                    exponents.append(factor.argument.times_power(RealInterval.exact(n), Fraction(0)))
                else:
                    plain[factor] = plain.get(factor, Fraction(0)) + n
        if coefficient.is_zero:
            return ZERO
        self._join_hyperbolic(plain)
        whole = [Product(coefficient, power, self._sorted(plain))]
        whole += [self.power(base, exponent) for base, exponent in roots.items() if exponent.denominator == 1]
        if len(whole) > 1:  # integer powers of a base bring in its factors: join them with the others
            whole += [self._root(base, exponent) for base, exponent in roots.items() if exponent.denominator != 1]
            whole += [self._function("exp", x) for x in exponents]
            return self.multiply(whole)
        factors = [(self._principal(base, exponent), Fraction(1)) for base, exponent in roots.items()]
        total = self.sum(exponents)
        if not total.is_zero:
            coefficient, factors = self._with_exponential(coefficient, total, factors)
        return Product(coefficient, power, self._sorted(dict([*whole[0].factors, *factors])))

    def _join_hyperbolic(self, powers: dict[Factor, Fraction]) -> None:
        """sinh/cosh of the same argument become tanh, in either position."""
        for factor in list(powers):
            if not isinstance(factor, Function) or factor.name != "sinhc_of_root":
                continue
            cosh = self._kept.get(("cosh_of_root", factor.argument))
            if cosh is None or powers.get(cosh, Fraction(0)) * powers[factor] >= 0:
                continue
            shared = min(abs(powers[factor]), abs(powers[cosh])) * (1 if powers[factor] > 0 else -1)
            tanh = self._keep(("tanhc_of_root", factor.argument), Function("tanhc_of_root", factor.argument))
            powers[factor] -= shared
            powers[cosh] += shared
            powers[tanh] = powers.get(tanh, Fraction(0)) + shared

    def _with_exponential(
        self, coefficient: RealInterval, x: Product, factors: list[tuple[Factor, Fraction]]
    ) -> tuple[RealInterval, list[tuple[Factor, Fraction]]]:
        if x.is_constant:
            return coefficient * x.coefficient.function("exp"), factors
        return coefficient, [*factors, *self._function("exp", x).factors]

    def _sorted(self, factors: Mapping[Factor, Fraction]) -> tuple[tuple[Factor, Fraction], ...]:
        kept = [(factor, n) for factor, n in factors.items() if n]
        return tuple(sorted(kept, key=lambda item: self._places[item[0]]))

    def _root(self, base: Product, exponent: Fraction) -> Product:
        return self._single(self._principal(base, exponent))

    def _principal(self, base: Product, exponent: Fraction) -> Factor:
        factor = PrincipalPower(base, exponent, base.order * exponent)
        return self._keep(("power", base, exponent), factor)

    def power(self, base: Product, exponent: Fraction) -> Product:
        """base^exponent; exponents that are no integers mean the principal branch."""
        if exponent == 0:
            return ONE
        if exponent.denominator != 1:
            return self._fractional_power(base, exponent)
        factors = []
        for factor, n in base.factors:
            if isinstance(factor, PrincipalPower) or (isinstance(factor, Function) and factor.name == "exp"):
                return self._power_with_roots(base, exponent)
            factors.append((factor, n * exponent))
        return Product(base.coefficient.power(exponent), base.power * exponent, tuple(factors))

    def _power_with_roots(self, base: Product, exponent: Fraction) -> Product:
        """Raise each factor and join them again, so that (sqrt u)^2 becomes u and exp(x)^n exp(n x)."""
        parts = [Product(base.coefficient.power(exponent), base.power * exponent, ())]
        for factor, n in base.factors:
            parts.append(Product(RealInterval.exact(1), Fraction(0), ((factor, n * exponent),)))
        return self.multiply(parts)

    def _fractional_power(self, base: Product, exponent: Fraction) -> Product:
        if base.is_constant:
            return number(base.coefficient.power(exponent))
        sign = base.coefficient.sign
        if sign == 0:
            raise ValueError("the sign of a constant under a root cannot be told")
        scale = (base.coefficient if sign > 0 else -base.coefficient).power(exponent)
        unit = Product(RealInterval.exact(sign), base.power, base.factors)
        if sign > 0 and not unit.factors and abs(unit.power) <= 2:
            return Product(scale, unit.power * exponent, ())  # arg s^p stays within -pi ... pi for Re s >= 0
        inner = _sole_power(unit)
        if inner is not None:
            return self.power(inner.base, inner.exponent * exponent).times_power(scale, Fraction(0))
        return self._root(unit, exponent).times_power(scale, Fraction(0))

    def sum(self, products: Iterable[Product]) -> Product:
        """The sum of products: like terms are joined, the lowest power of s and the highest coefficient taken out."""
        collected: dict[tuple[Fraction, tuple[tuple[Factor, Fraction], ...]], RealInterval] = {}
        for term in self._flattened(products):
            key = (term.power, term.factors)
            collected[key] = collected[key] + term.coefficient if key in collected else term.coefficient
        terms = [Product(c, power, factors) for (power, factors), c in collected.items() if not c.is_zero]
        if len(terms) < 2:
            return terms[0] if terms else ZERO
        rewritten = self._without_cancellation(terms)
        return self._normal_sum(terms) if rewritten is None else self.sum(rewritten)

    def _flattened(self, products: Iterable[Product]) -> list[Product]:
        """A term that is a constant times a power of s times one sum gives its terms."""
        terms: list[Product] = []
        for product in products:
            if len(product.factors) == 1 and isinstance(product.factors[0][0], Sum) and product.factors[0][1] == 1:
                inner = product.factors[0][0].terms
                terms += [term.times_power(product.coefficient, product.power) for term in inner]
            elif not product.is_zero:
                terms.append(product)
        return terms

    def _normal_sum(self, terms: list[Product]) -> Product:
        lowest = min(term.power for term in terms)
        terms = sorted(terms, key=lambda term: (-term.power, [self._places[factor] for factor, _ in term.factors]))
        lead = terms[0].coefficient
        lead = lead if lead.is_exact else RealInterval.exact(1)
        divided = tuple(term.times_power(lead.reciprocal(), -lowest) for term in terms)
        order = min(term.order for term in divided)
        kept = self._keep(divided, Sum(divided, order))
        return self._single(kept).times_power(lead, lowest)

    def _without_cancellation(self, terms: list[Product]) -> list[Product] | None:
        """Where the terms of lowest order cancel at s = 0 exactly, exp x in them becomes 1 + x (exp x - 1)/x."""
        order = min(term.order for term in terms)
        lowest = [term for term in terms if term.order == order]
        leads = [value_at_zero(term) for term in lowest]
        known = [lead for lead in leads if lead is not None]
        if len(lowest) < 2 or len(known) < len(leads) or sum(known, Fraction(0)) != 0:
            return None
        expanded = [self._expanded(term) if term.order == order else [term] for term in terms]
        if all(len(parts) == 1 for parts in expanded):
            return None
        return [part for parts in expanded for part in parts]

    def _expanded(self, term: Product) -> list[Product]:
        for factor, n in term.factors:
            if isinstance(factor, Function) and factor.name == "exp" and n == 1 and factor.argument.order > 0:
                others = tuple(item for item in term.factors if item[0] is not factor)
                rest = Product(term.coefficient, term.power, others)
                x = factor.argument
                return [rest, self.multiply([rest, x, self._function("exponential_quotient", x)])]
        return [term]


def value_at_zero(product: Product) -> Fraction | None:
    """The regular part of a product at s = 0 where it is exactly known, else None."""
    if not product.coefficient.is_exact:
        return None
    value = product.coefficient.lower
    for factor, n in product.factors:
        part = _factor_at_zero(factor)
        if part is None or n.denominator != 1 or (part == 0 and n < 0):
            return None
        value *= part ** int(n)
    return value


def _factor_at_zero(factor: Factor) -> Fraction | None:
    if isinstance(factor, Function):
        return Fraction(1) if factor.argument.order > 0 else None
    if isinstance(factor, PrincipalPower):
        base = value_at_zero(factor.base)
        return Fraction(1) if base == 1 and abs(factor.base.order) < 2 else None
    values = [value_at_zero(term) for term in factor.terms if term.order == factor.order]
    known = [value for value in values if value is not None]
    return sum(known, Fraction(0)) if len(known) == len(values) else None


def _sole_power(product: Product) -> PrincipalPower | None:
    """u^a where the product is just that, with |a| < 1."""
    if product.power or len(product.factors) != 1 or product.coefficient.sign < 0:
        return None
    factor, n = product.factors[0]
    return factor if isinstance(factor, PrincipalPower) and n == 1 and abs(factor.exponent) < 1 else None


def _exponent(product: Product) -> Fraction:
    """A constant exponent; one that is not rational is replaced by the double nearest to it."""
    if not product.is_constant:
        raise ValueError("an exponent of the formula depends on s")
    value = product.coefficient
    return value.lower if value.is_exact else Fraction(float(value))
