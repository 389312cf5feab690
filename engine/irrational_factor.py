"""A formula that is irrational in s as coprime factors: its power of s at 0 taken out, the rest enclosed by composed models."""

from __future__ import annotations

from encircle.engine.coprime_factors import CoprimeFactors, Factor
from encircle.engine.declarations import FormulaBlock
from encircle.engine.factor_models import FactorModel


class IrrationalBlock:
    features: tuple[float, ...] = ()
    unstable_poles: int = 0

    def __init__(self, block: FormulaBlock) -> None:
        raise NotImplementedError

    def coprime_factors(self, scale: float) -> CoprimeFactors: ...
    def models(self, scale: float) -> dict[Factor, FactorModel]: ...
