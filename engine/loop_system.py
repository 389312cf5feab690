"""A project compiled for counting: diagram, coprime factors, determinants of all stages, enclosures on cells.

Nothing here depends on the factors at the cuts; they enter as weights of the terms, so a gain change needs no new
model.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import exp

import numpy as np

from encircle.engine.block_poles import FactorPoles, poles_of
from encircle.engine.closing_order import ClosingOrder, PartKey, closing_order
from encircle.engine.coprime_factors import (
    CoprimeFactors,
    DelayKernel,
    Factor,
    MeasuredFactor,
    coprime_factors,
    one_object_each,
)
from encircle.engine.declarations import Declarations, FormulaBlock, MeasuredBlock
from encircle.engine.delay_kernel import DelayKernelModel
from encircle.engine.diagram import Diagram, build_diagram
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.factor_models import FactorModel
from encircle.engine.grids import distinct
from encircle.engine.irrational_factor import IrrationalBlock
from encircle.engine.loop_determinant import Determinant, DeterminantBuilder
from encircle.engine.measured_factor import MeasuredModel, measured_factors
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import FloatArray
from encircle.engine.rounding import check_elementary_functions
from encircle.engine.shared_factors import split_shared_factors
from encircle.engine.transfer_function import TransferFunction, transfer_function

HALF_WIDTHS = (-10.0, -3.0, -1.0, -0.3, 0.0, 0.3, 1.0, 3.0, 10.0)


@dataclass(frozen=True, slots=True)
class LoopSystem:
    """Everything about a project that does not depend on the factors at the cuts.

    ``determinants`` belong to ``order.parts()``. ``poles`` holds, for each block, its poles on and right of the axis;
    ``declared`` the stated unstable poles of measured and irrational blocks. ``features``: frequencies in rad/s,
    ascending, near which the slope of something changes; ``resonances``: where to look closely. ``lines``: all
    measured lines in rad/s, ascending.
    """

    declarations: Declarations
    diagram: Diagram
    order: ClosingOrder
    factors: Mapping[str, CoprimeFactors]
    transfers: Mapping[str, TransferFunction]
    poles: Mapping[str, FactorPoles]
    declared: Mapping[str, int]
    factor_models: Mapping[Factor, FactorModel]
    determinants: Mapping[PartKey, Determinant]
    features: FloatArray
    resonances: FloatArray
    lines: FloatArray
    first_lines: FloatArray

    @property
    def lowest(self) -> float:
        """The lowest feature in rad/s."""
        return float(self.features[0])

    @property
    def highest(self) -> float:
        """The highest feature in rad/s."""
        return float(self.features[-1])

    def blocks_in(self, key: PartKey) -> tuple[str, ...]:
        """Names of the blocks in a part."""
        return self.diagram.names(key[0])

    def measured_in(self, key: PartKey) -> list[MeasuredModel]:
        """The measured blocks in a part."""
        found = (self.factor_models.get(MeasuredFactor(name)) for name in self.blocks_in(key))
        return [model for model in found if isinstance(model, MeasuredModel)]


def compile_system(declarations: Declarations) -> LoopSystem:
    """Compile the declarations of a project file.

    Raises ProjectError for blocks that are refused, algebraic loops without a solution, cuts without feedback, and
    diagrams too dense to be expanded.
    """
    check_elementary_functions()
    transfers, irrational = _transfers(declarations)
    diagram = build_diagram(declarations)
    transfers, movable = split_shared_factors(transfers)
    features = _features(declarations, transfers, irrational.values())
    scale = exp(float(np.mean(np.log(features))))
    factors = {name: coprime_factors(transfer, scale) for name, transfer in transfers.items()}
    models: dict[Factor, FactorModel] = {}
    for name, block in declarations.blocks.items():
        if isinstance(block, MeasuredBlock):
            factors[name] = measured_factors(block, scale)
            models[MeasuredFactor(name)] = MeasuredModel(block)
        elif name in irrational:
            factors[name] = irrational[name].coprime_factors(scale)
            models.update(irrational[name].models(scale))
    factors = one_object_each(factors)
    order = closing_order(diagram)
    builder = DeterminantBuilder(diagram, factors, movable)
    determinants = {key: builder.build(*key) for key in order.parts()}
    terms = [(term.powers, term.delay) for determinant in determinants.values() for term in determinant.terms]
    models.update({f: DelayKernelModel(f) for powers, _ in terms for f in powers if isinstance(f, DelayKernel)})
    lines = [block.response.omega for block in declarations.blocks.values() if isinstance(block, MeasuredBlock)]
    return LoopSystem(
        declarations,
        diagram,
        order,
        factors,
        transfers,
        {name: poles_of(found.denominator) for name, found in factors.items()},
        _declared(declarations, irrational),
        models,
        determinants,
        features,
        _resonances(transfers.values()),
        distinct(np.concatenate(lines)) if lines else np.empty(0),
        np.array([omega[0] for omega in lines]),
    )


def _transfers(declarations: Declarations) -> tuple[dict[str, TransferFunction], dict[str, IrrationalBlock]]:
    """Rational blocks with dead time exactly, the other formulas compiled; all refusals are reported together."""
    transfers: dict[str, TransferFunction] = {}
    irrational: dict[str, IrrationalBlock] = {}
    problems: list[Problem] = []
    for name, block in declarations.blocks.items():
        if isinstance(block, MeasuredBlock):
            continue
        try:
            transfer = transfer_function(block)
            if transfer is not None:
                transfers[name] = transfer
            elif isinstance(block, FormulaBlock):
                irrational[name] = IrrationalBlock(block)
        except ProjectError as error:
            problems.extend(error.problems)
    if problems:
        raise ProjectError(*problems)
    return transfers, irrational


def _declared(declarations: Declarations, irrational: Mapping[str, IrrationalBlock]) -> dict[str, int]:
    declared = {name: block.unstable_poles for name, block in irrational.items()}
    for name, block in declarations.blocks.items():
        if isinstance(block, MeasuredBlock):
            declared[name] = block.unstable_poles
    return declared


def _features(
    declarations: Declarations, transfers: Mapping[str, TransferFunction], irrational: Iterable[IrrationalBlock]
) -> FloatArray:
    """Frequencies near which something changes, ascending, rad/s: moduli of poles and zeros, delays, ends of data."""
    found: list[float] = []
    for transfer in transfers.values():
        polynomials = [f for f, _ in (*transfer.numerator, *transfer.denominator)]
        polynomials += [n for _, n in transfer.delayed_sum]
        for polynomial in polynomials:
            found += _moduli(polynomial)
        delays = [transfer.delay + delay for delay, _ in transfer.delayed_sum] or [transfer.delay]
        found += [1.0 / float(delay) for delay in delays if delay > 0]
    for block in declarations.blocks.values():
        if isinstance(block, MeasuredBlock):
            found += [float(block.response.omega[0]), float(block.response.omega[-1])]
    for formula in irrational:
        found += formula.features
    usable = np.array(sorted(value for value in found if 1e-100 < value < 1e100))
    return usable if len(usable) else np.ones(1)


def _resonances(transfers: Iterable[TransferFunction]) -> FloatArray:
    """Points across each lightly damped pole or zero, in steps of its half width, rad/s."""
    found: list[float] = []
    for transfer in transfers:
        for factor, _ in (*transfer.numerator, *transfer.denominator):
            for root in factor.roots():
                if root.imag > 0.0 and abs(root.real) < 0.5 * abs(root):
                    found += [float(root.imag + step * abs(root.real)) for step in HALF_WIDTHS]
    return np.array(sorted(value for value in found if 0.0 < value < 1e100))


def _moduli(polynomial: Polynomial) -> list[float]:
    if polynomial.degree < 1:
        return []
    return [float(abs(root)) for root in polynomial.roots() if root != 0]

