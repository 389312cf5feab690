"""Why a count stays open, in sentences, with the stretch of frequency and what would decide it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from encircle.engine.closing_order import PartKey
from encircle.engine.counting import Counter, Gains, PartCount, term_weights
from encircle.engine.encirclement import Cause, OpenCell
from encircle.engine.high_frequency import FarCause
from encircle.engine.loop_system import LoopSystem
from encircle.engine.measured_factor import MeasuredModel
from encircle.engine.result import UndecidedStretch

ON_THE_AXIS = "the closed loop has a pole on the axis near {at}, or one that cannot be told from it"
LEAST_RATIO = 1e-3  # the band is this much wider than the distance to -1: no spacing of lines would decide


def explain(
    counter: Counter, key: PartKey, gains: Gains, count: PartCount, unit: float
) -> tuple[UndecidedStretch, ...]:
    """Each stretch that prevents the count of a part; ``unit`` is the file's frequency unit in rad/s."""
    system = counter.system
    off = [model for model in system.measured_in(key) if model.first_line_is_off()]
    if off:
        return tuple(_first_line(model, unit) for model in off)
    if count.unstable is not None and count.unstable < 0:
        return (_contradiction(system, key, count.unstable),)
    if count.far is not None:
        return (_at_infinity(system, key, count.far, unit),)
    stretches: dict[UndecidedStretch, None] = {}
    for cell in count.open_cells:
        for stretch in _cell(counter, key, gains, cell, unit):
            stretches[stretch] = None
    return tuple(stretches)


def frequency_text(omega: float, unit: float) -> str:
    """A frequency with its unit, four digits."""
    return f"{omega / unit:.4g} {'rad/s' if unit == 1.0 else 'Hz'}"


def _at_infinity(system: LoopSystem, key: PartKey, cause: FarCause, unit: float) -> UndecidedStretch:
    for model in system.measured_in(key):
        if model.block.roll_off is None:
            return _above_last_line(model, unit)
    if cause is FarCause.NEUTRAL:
        why = (
            "with dead time the gain at infinite frequency reaches 1 (a neutral loop): arbitrarily small changes of "
            "the dead times would move infinitely many poles across the axis; add roll-off to the loop"
        )
    elif cause is FarCause.ILL_POSED:
        why = (
            "the highest powers of the determinant cancel exactly at infinite frequency: join the blocks that cancel "
            "into one, or put the dynamics that the devices have there into them"
        )
    else:
        why = "the behaviour above the highest feature is not bounded well enough: a steeper roll_off would decide"
    return UndecidedStretch(system.highest / unit, None, why)


def _contradiction(system: LoopSystem, key: PartKey, count: int) -> UndecidedStretch:
    """Fewer poles than none: the declarations cannot be true."""
    blocks = dict.fromkeys(system.blocks_in(key))
    stated = [(block, system.declared[block]) for block in blocks if block in system.declared]
    named = " and ".join(f"`unstable_poles = {poles}` of `{block}`" for block, poles in stated)
    why = (
        f"{named} cannot be true: the closed loop would have {count} unstable poles, so at least {-count} more must be "
        "stated as unstable"
    )
    return UndecidedStretch(0.0, None, why)


def _first_line(model: MeasuredModel, unit: float) -> UndecidedStretch:
    m = model.block.integrators
    why = (
        f"the first line of `{model.block.name}` lies more than 45 degrees off its asymptote k/s^{m}: measure further "
        "down, or correct `integrators`"
    )
    return UndecidedStretch(0.0, float(model.lines[0]) / unit, why)


def _above_last_line(model: MeasuredModel, unit: float) -> UndecidedStretch:
    last = float(model.lines[-1])
    why = (
        f"above the last line of `{model.block.name}` ({frequency_text(last, unit)}) nothing is assumed: "
        "state `roll_off`, or measure further up"
    )
    return UndecidedStretch(last / unit, None, why)


def _cell(counter: Counter, key: PartKey, gains: Gains, cell: OpenCell, unit: float) -> list[UndecidedStretch]:
    centre = 0.5 * (cell.lower + cell.upper)
    if cell.cause is Cause.BUDGET:
        why = "the count ran out of its budget of cells before this stretch was decided"
        return [UndecidedStretch(cell.lower / unit, cell.upper / unit, why)]
    banded = [model for model in counter.system.measured_in(key) if _has_band(model, centre)]
    if cell.cause is Cause.DATA and banded:
        ratio = _room(counter, key, gains, centre)
        return [_gap(model, centre, ratio, unit) for model in banded]
    at = frequency_text(centre, unit) if cell.lower > 0.0 else frequency_text(0.0, unit)
    lower, upper = cell.lower / unit, cell.upper / unit
    return [UndecidedStretch(lower, upper, ON_THE_AXIS.format(at=at))]


def _has_band(model: MeasuredModel, omega: float) -> bool:
    return bool(omega >= model.lines[0])


def _room(counter: Counter, key: PartKey, gains: Gains, omega: float) -> float:
    """Distance of the middle of the band from the critical point, as a part of the band's half width."""
    weights = term_weights(counter.system.determinants[key], gains)[None, :]
    point = np.array([omega])
    models = counter.models((key,)).on_cells(point, point).combine(weights)
    width = float(np.abs(models.g[:, 0, 0]).sum() + models.radius[0, 0])
    return float(np.abs(models.v[0, 0])) / width if np.isfinite(width) and width > 0.0 else 0.0


def _gap(model: MeasuredModel, omega: float, ratio: float, unit: float) -> UndecidedStretch:
    lines, name = model.lines, model.block.name
    place = int(model.place(np.array([omega]))[0])
    if place == len(lines) + 1:
        if model.block.roll_off is None:
            return _above_last_line(model, unit)
        why = f"above the last line of `{name}` the declared roll-off does not keep L from -1: measure further up"
        return UndecidedStretch(float(lines[-1]) / unit, None, why)
    if place == 1:
        why = (
            f"the step from the asymptote k/s^{model.block.integrators} to the first line of `{name}` reaches -1: "
            "measure further down"
        )
        return UndecidedStretch(float(lines[0]) / unit, float(lines[0]) / unit, why)
    lower, upper = float(lines[place - 2]), float(lines[place - 1])
    if ratio < LEAST_RATIO:
        why = f"the response runs through -1 between these lines of `{name}`: no closer spacing would decide"
    else:
        spacing = frequency_text(0.9 * min(ratio, 1.0) * (upper - lower), unit)
        why = f"the band between these lines of `{name}` reaches -1: lines every {spacing} would decide"
    return UndecidedStretch(lower / unit, upper / unit, why)


def joined(stretches: Sequence[UndecidedStretch]) -> tuple[UndecidedStretch, ...]:
    """Without repetitions, in the order of frequency."""
    return tuple(sorted(dict.fromkeys(stretches), key=lambda stretch: (stretch.lower, stretch.upper or np.inf)))
