"""Magnitude and phase over logarithmic frequency, with limits, crossovers and margins."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from encircle.engine.result import ComplexArray, LoopCurve
from encircle.tui.clipping import FloatArray, Window
from encircle.tui.drawing import Caption, Curve, Drawing, Frame, Mark, Upright
from encircle.tui.glyphs import Glyph
from encircle.tui.loop_marks import LoopMarks
from encircle.tui.phase import phase_degrees
from encircle.tui.readout import nearest_index
from encircle.tui.roles import Role
from encircle.tui.ticks import Tick, decibel_ticks, degree_ticks, logarithmic_ticks

GUTTER = 6
FOOT = 1
# Characters across and rows upwards that a labelled tick needs.
TICK_COLUMNS = 7
TICK_ROWS = 3
MAGNITUDE_SHARE = 0.58
DECIBEL_STEP = 20.0
MOST_DECIBELS = 160.0
DEGREE_STEP = 90.0
MOST_DEGREES = 720.0
# Where |L| is smaller, its phase is not worth the room that it would take.
FAINT_DECIBELS = -40.0


@dataclass(frozen=True, slots=True)
class FrequencyView:
    """The band in view, in ``unit``, 0 < lower < upper, and which of |L|, phase of L, |S| and |T| are shown."""

    lower: float
    upper: float
    unit: str = "Hz"
    magnitude: bool = True
    phase: bool = True
    sensitivity: bool = False
    complementary: bool = False

    def __post_init__(self) -> None:
        if not 0 < self.lower < self.upper < np.inf:
            raise ValueError(f"no band runs from {self.lower} to {self.upper}")
        if not (self.magnitude or self.phase):
            raise ValueError("a frequency plot shows the magnitude, the phase or both")


NO_MARKS = LoopMarks()


def frequency_drawings(
    curve: LoopCurve,
    width: int,
    height: int,
    view: FrequencyView,
    *,
    marks: LoopMarks = NO_MARKS,
    before: LoopCurve | None = None,
    cursor: int | None = None,
) -> tuple[Drawing, ...]:
    """The magnitude above the phase, or one of them; ``width`` by ``height`` characters together.

    ``before``: an earlier curve, kept dim behind. ``cursor``: the sample of the curve that the cursor stands on.
    """
    scene = _Scene(curve, view, marks, before, cursor)
    if not (view.magnitude and view.phase) or height < 2 * TICK_ROWS:
        frame = Frame.fitted(width, height, GUTTER, FOOT)
        return (scene.magnitude(frame) if view.magnitude else scene.phase(frame),)
    upper = round(MAGNITUDE_SHARE * (height - FOOT))
    return (
        scene.magnitude(Frame.fitted(width, upper, GUTTER, 0)),
        scene.phase(Frame.fitted(width, height - upper, GUTTER, FOOT)),
    )


def decibels(values: ComplexArray) -> FloatArray:
    """20 log10 |values|; minus infinity for 0."""
    with np.errstate(divide="ignore", over="ignore"):
        return 20 * np.log10(np.abs(values))


@dataclass(frozen=True, slots=True, eq=False)
class _Trace:
    """One value (n,) for each sample of a curve, and how it is drawn."""

    curve: LoopCurve
    values: FloatArray
    role: Role
    gap: int = 1

    def in_band(self, view: FrequencyView) -> FloatArray:
        """The finite values within the band in view."""
        inside = (self.curve.frequency >= view.lower) & (self.curve.frequency <= view.upper)
        return self.values[inside & np.isfinite(self.values)]

    def line(self) -> Curve:
        """The values over log10 of frequency, broken between the pieces of the curve."""
        breaks = [start for start, _ in self.curve.pieces if start > 0]
        x = np.insert(np.log10(self.curve.frequency), breaks, np.nan)
        return Curve(x, np.insert(self.values, breaks, np.nan), self.role, self.gap)


@dataclass(frozen=True, slots=True, eq=False)
class _Scene:
    """What the magnitude and the phase have in common."""

    curve: LoopCurve
    view: FrequencyView
    marks: LoopMarks
    before: LoopCurve | None
    cursor: int | None

    def magnitude(self, frame: Frame) -> Drawing:
        """|L|, and |S| and |T| where wanted, in dB."""
        traces = self._magnitude_traces()
        lower, upper = _decibel_range(np.concatenate([trace.in_band(self.view) for trace in traces]))
        return self._drawing(
            frame,
            Window(*self._band(), lower, upper),
            [*self._magnitude_levels(), *(trace.line() for trace in traces)],
            _decibel_captions(self.view),
            self._marks(decibels(self.curve.L)),
            decibel_ticks(lower, upper, _tick_count(frame)),
        )

    def phase(self, frame: Frame) -> Drawing:
        """The phase of L in degrees, with the lines on which L is a negative real number."""
        values = phase_degrees(self.curve)
        traces = [_Trace(self.curve, values, Role.CURVE)]
        if self.before is not None:
            traces.append(_Trace(self.before, phase_degrees(self.before), Role.CURVE_BEFORE, gap=2))
        lower, upper = _degree_range(np.concatenate([_clear_phase(trace).in_band(self.view) for trace in traces]))
        return self._drawing(
            frame,
            Window(*self._band(), lower, upper),
            [*self._phase_levels(lower, upper), *(trace.line() for trace in traces)],
            (Caption("phase °", Role.CURVE),),
            self._marks(values),
            degree_ticks(lower, upper, _tick_count(frame)),
        )

    def _drawing(
        self,
        frame: Frame,
        window: Window,
        curves: list[Curve],
        captions: tuple[Caption, ...],
        marks: list[Mark],
        y_ticks: tuple[Tick, ...],
    ) -> Drawing:
        most = max(frame.canvas.columns // TICK_COLUMNS, 2)
        return Drawing(
            frame,
            window,
            tuple(curves),
            marks=tuple(marks),
            uprights=self._cursor_line(),
            x_ticks=logarithmic_ticks(self.view.lower, self.view.upper, most),
            y_ticks=y_ticks,
            captions=captions,
            x_unit=self.view.unit,
        )

    def _band(self) -> tuple[float, float]:
        return float(np.log10(self.view.lower)), float(np.log10(self.view.upper))

    def _level(self, value: float, role: Role) -> Curve:
        """A horizontal line."""
        return Curve(np.array(self._band()), np.full(2, value), role, gap=3)

    def _magnitude_traces(self) -> list[_Trace]:
        traces = [_Trace(self.curve, decibels(self.curve.L), Role.CURVE)]
        if self.before is not None:
            traces.append(_Trace(self.before, decibels(self.before.L), Role.CURVE_BEFORE, gap=2))
        if self.view.sensitivity:
            traces.append(_Trace(self.curve, decibels(self.curve.S), Role.SENSITIVITY, gap=2))
        if self.view.complementary:
            traces.append(_Trace(self.curve, decibels(self.curve.T), Role.COMPLEMENTARY, gap=3))
        return traces

    def _magnitude_levels(self) -> list[Curve]:
        """0 dB, and the limits of the peaks that are shown."""
        wanted = (
            (0.0, Role.UNIT_CIRCLE, True),
            (self.marks.sensitivity_limit_db, Role.LIMIT, self.view.sensitivity),
            (self.marks.complementary_limit_db, Role.LIMIT, self.view.complementary),
        )
        return [self._level(value, role) for value, role, shown in wanted if shown and value is not None]

    def _phase_levels(self, lower: float, upper: float) -> list[Curve]:
        """The odd multiples of 180 degrees, on which L is a negative real number."""
        first, last = np.ceil((lower - 180) / 360), np.floor((upper - 180) / 360)
        return [self._level(180 + 360 * float(turn), Role.UNIT_CIRCLE) for turn in np.arange(first, last + 1)]

    def _marks(self, values: FloatArray) -> list[Mark]:
        """Margins, crossovers and the cursor on the line through ``values`` (n,)."""
        places = [] if self.cursor is None else [(self.cursor, Glyph.CURSOR, Role.CURSOR)]
        if self.curve.frequency.size:
            places += [(nearest_index(self.curve, f), Glyph.MARGIN, Role.MARGIN) for f in self.marks.margins]
            places += [(nearest_index(self.curve, f), Glyph.CROSSOVER, Role.CROSSOVER) for f in self.marks.crossovers]
        x = np.log10(self.curve.frequency)
        return [Mark(float(x[place]), float(values[place]), glyph, role) for place, glyph, role in places]

    def _cursor_line(self) -> tuple[Upright, ...]:
        if self.cursor is None:
            return ()
        return (Upright(float(np.log10(self.curve.frequency[self.cursor])), Role.CURSOR),)


def _decibel_captions(view: FrequencyView) -> tuple[Caption, ...]:
    alone = not (view.sensitivity or view.complementary)
    captions = [Caption("|L| dB", Role.CURVE, 0 if alone else 1)]
    captions += [Caption("|S|", Role.SENSITIVITY, 2)] if view.sensitivity else []
    captions += [Caption("|T|", Role.COMPLEMENTARY, 3)] if view.complementary else []
    return tuple(captions)


def _clear_phase(trace: _Trace) -> _Trace:
    """The phase where |L| is not faint, or all of it if it is faint everywhere."""
    clear = decibels(trace.curve.L) >= FAINT_DECIBELS
    return replace(trace, values=np.where(clear, trace.values, np.nan)) if clear.any() else trace


def _decibel_range(seen: FloatArray) -> tuple[float, float]:
    """Steps of 20 dB about all but the outermost hundredth of the values and 0 dB, not more than MOST_DECIBELS."""
    return _rounded_range(seen, 0.0, DECIBEL_STEP, MOST_DECIBELS)


def _degree_range(seen: FloatArray) -> tuple[float, float]:
    """Steps of 90 degrees about the values and -180 degrees, not more than two turns."""
    return _rounded_range(seen, -180.0, DEGREE_STEP, MOST_DEGREES)


def _rounded_range(seen: FloatArray, always: float, step: float, most: float) -> tuple[float, float]:
    """A range in whole steps that holds ``always``; of one longer than ``most`` each end keeps up to half of that."""
    ends = np.quantile(seen, (0.01, 0.99)) if seen.size else np.array([always, always])
    below = step * np.ceil(max(always - ends[0], 0.0) / step + 0.02)
    above = step * np.ceil(max(ends[1] - always, 0.0) / step + 0.02)
    room_below, room_above = max(most / 2, most - above), max(most / 2, most - below)
    return float(always - min(below, room_below)), float(always + min(above, room_above))


def _tick_count(frame: Frame) -> int:
    return max(-(-frame.canvas.rows // TICK_ROWS), 2)
