"""What the result means: limits, crossings, gain ranges, margins, null rules, the verdict on the whole; by hand."""

from __future__ import annotations

import cmath
import json
import math
from pathlib import Path

import numpy as np
import pytest
from single_loop_files import SingleLoop, assert_consistent, opened

from encircle.engine.result import GainRange, LimitFinding, LoopResult
from encircle.tui.result_json import result_json

HEAD = 'format = 1\nfrequency_unit = "rad/s"\n'


def loop_of(
    numerator: list[float], denominator: list[float], folder: Path, dead_time: float = 0.0, gain: float = 1.0
) -> LoopResult:
    found = SingleLoop(numerator, denominator, dead_time, gain).opened(folder).loop("loop")
    assert_consistent(found)
    return found


def with_limits(loop: SingleLoop, limits: str, folder: Path, shared: str = "") -> dict[str, LimitFinding]:
    text = loop.text() + f"limits = {{ {limits} }}\n"
    if shared:
        text = text.replace("[[loops]]", f"[limits]\n{shared}\n[[loops]]")
    return {finding.name: finding for finding in opened(text, folder).loop("loop").limits}


THREE_LAGS = SingleLoop([4.0], [1.0, 3.0, 3.0, 1.0])  # limit: factor 2 at sqrt 3; unity where (1+w^2)^3 = 16
UNITY = math.sqrt(16 ** (1 / 3) - 1)
PHASE = 180 - 3 * math.degrees(math.atan(UNITY))
AROUND = SingleLoop([2.0], [1.0, -1.0])  # 2/(s - 1): lower limit 1/2, |S| <= 1, PM 60


# ---- limits ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "found"),
    [
        ("gain_margin_db", 20 * math.log10(2)),
        ("gain_increase_db", 20 * math.log10(2)),
        ("phase_margin_deg", PHASE),
        ("delay_margin_s", math.radians(PHASE) / UNITY),
        ("crossover_min", UNITY),
    ],
)
def test_limits_that_ask_for_at_least(name: str, found: float, tmp_path: Path) -> None:
    for required, met in ((found * 0.999, True), (found * 1.001, False)):
        finding = with_limits(THREE_LAGS, f"{name} = {required!r}", tmp_path)[name]
        assert finding.required == required
        assert finding.found == pytest.approx(found, rel=1e-9)
        assert finding.met is met


def test_limits_that_ask_for_at_most(tmp_path: Path) -> None:
    for required, met in ((UNITY * 1.001, True), (UNITY * 0.999, False)):
        finding = with_limits(THREE_LAGS, f"crossover_max = {required!r}", tmp_path)["crossover_max"]
        assert (finding.found, finding.met) == (pytest.approx(UNITY, rel=1e-9), met)
    S_peak = 20 * math.log10(1 / 0.5)  # K1 of A33 in check_values.json: |S| -> 2 at infinity, modulus 1/2
    biproper = SingleLoop([-1.0, 2.0], [2.0, -1.0])
    for required, met in ((6.03, True), (6.01, False)):
        finding = with_limits(biproper, f"sensitivity_peak_db = {required}", tmp_path)["sensitivity_peak_db"]
        assert (finding.found, finding.met) == (pytest.approx(S_peak, rel=1e-6), met)
    for required, met in ((0.499, True), (0.501, False)):
        finding = with_limits(biproper, f"modulus_margin = {required}", tmp_path)["modulus_margin"]
        assert (finding.found, finding.met) == (pytest.approx(0.5, rel=1e-6), met)
    T_peak = 20 * math.log10(2 / math.sqrt(3))  # 1/(s(s+1)): zeta = 1/2
    for required, met in ((1.26, True), (1.24, False)):
        finding = with_limits(SingleLoop([1.0], [1.0, 1.0, 0.0]), f"complementary_peak_db = {required}", tmp_path)
        assert finding["complementary_peak_db"].found == pytest.approx(T_peak, rel=1e-6)
        assert finding["complementary_peak_db"].met is met


def test_gain_margin_holds_in_both_directions(tmp_path: Path) -> None:
    """2/(s - 1): factor 1/2 downward, 6.02 dB; no limit upward."""
    findings = with_limits(AROUND, "gain_margin_db = 6.1, gain_increase_db = 40, gain_decrease_db = 6.0", tmp_path)
    found = {name: (finding.found, finding.met) for name, finding in findings.items()}
    assert found["gain_margin_db"] == (pytest.approx(6.0206, rel=1e-5), False)
    assert found["gain_increase_db"] == (None, True)
    assert found["gain_decrease_db"] == (pytest.approx(6.0206, rel=1e-5), True)


def test_a_limit_that_does_not_exist_is_met(tmp_path: Path) -> None:
    """0.5/(s + 1) never reaches 1: no gain, phase or delay limit."""
    findings = with_limits(
        SingleLoop([0.5], [1.0, 1.0]), "gain_margin_db = 60, phase_margin_deg = 90, delay_margin_s = 1e6", tmp_path
    )
    assert all((f.found, f.met) == (None, True) for f in findings.values())
    assert len(findings) == 3


def test_a_crossover_limit_without_a_crossover_is_not_met(tmp_path: Path) -> None:
    findings = with_limits(SingleLoop([0.5], [1.0, 1.0]), "crossover_min = 0.1, crossover_max = 10", tmp_path)
    assert all((f.found, f.met) == (None, False) for f in findings.values())
    assert len(findings) == 2


def crossovers(numerator: list[float], denominator: list[float]) -> list[float]:
    """Where |N(jw)| = |D(jw)|: positive real roots in w, by numpy."""
    N, D = (np.polyval(np.poly1d(c), np.poly1d([1j, 0])) for c in (numerator, denominator))
    squares = N * np.poly1d(N.coeffs.conj()) - D * np.poly1d(D.coeffs.conj())
    return sorted(root.real for root in np.roots(squares.coeffs) if root.real > 0 and abs(root.imag) < 1e-9 * root.real)


def test_crossover_limits_judge_the_lowest_and_the_highest(tmp_path: Path) -> None:
    """0.5 (s^2 + 0.02 s + 0.5)/(s (s^2 + 0.02 s + 1)) passes 1 three times: on its slope, twice at its resonance."""
    loop = SingleLoop([0.5, 0.01, 0.25], [1.0, 0.02, 1.0, 0.0])
    expected = crossovers([0.5, 0.01, 0.25], [1.0, 0.02, 1.0, 0.0])
    assert len(expected) == 3
    findings = with_limits(loop, "crossover_min = 0.01, crossover_max = 100", tmp_path)
    assert findings["crossover_min"].found == pytest.approx(expected[0], rel=1e-7)
    assert findings["crossover_max"].found == pytest.approx(expected[2], rel=1e-7)


def test_crossover_limits_are_in_the_files_unit(tmp_path: Path) -> None:
    text = THREE_LAGS.text().replace('"rad/s"', '"Hz"') + "limits = { crossover_min = 0.1 }\n"
    (finding,) = opened(text, tmp_path).loop("loop").limits
    assert finding.found == pytest.approx(UNITY / (2 * math.pi), rel=1e-9)


def test_a_loops_limits_replace_the_shared_ones_key_by_key(tmp_path: Path) -> None:
    findings = with_limits(
        THREE_LAGS, "phase_margin_deg = 20", tmp_path, shared="phase_margin_deg = 45\ngain_margin_db = 6"
    )
    assert {name: f.required for name, f in findings.items()} == {"phase_margin_deg": 20, "gain_margin_db": 6}


def test_an_unstable_loop_meets_no_limit_and_an_undecided_one_is_not_judged(tmp_path: Path) -> None:
    unstable = with_limits(SingleLoop([9.0], [1.0, 3.0, 3.0, 1.0]), "gain_margin_db = 6, crossover_max = 9", tmp_path)
    assert [(f.found, f.met) for f in unstable.values()] == [(None, False)] * 2
    undecided = with_limits(SingleLoop([8.0], [1.0, 3.0, 3.0, 1.0]), "gain_margin_db = 6, crossover_max = 9", tmp_path)
    assert [f.met for f in undecided.values()] == [None] * 2


# ---- the verdict on the whole ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("gain", "limit", "result"),
    [(4.0, 5.9, "pass"), (4.0, 6.1, "fail"), (9.0, 5.9, "fail"), (8.0, 5.9, "undecided")],
)
def test_result_of_one_loop(gain: float, limit: float, result: str, tmp_path: Path) -> None:
    """gain/(s + 1)^3: 6.02 dB of room at 4, unstable at 9, on the axis at 8."""
    text = SingleLoop([gain], [1.0, 3.0, 3.0, 1.0]).text() + f"limits = {{ gain_margin_db = {limit} }}\n"
    assert opened(text, tmp_path).check().result == result


def test_a_declared_unstable_stage_passes_once_a_later_loop_stabilises(tmp_path: Path) -> None:
    text = """
[blocks.plant]
formula = "1/(s - 1)"
[signals]
e = "u - y"
y = "0.5*plant*e"
f = "-y"
u = "4*f"
[[loops]]
name = "inner"
cut = "e"
leaves_unstable = 1
[[loops]]
name = "outer"
cut = "f"
gain = GAIN
"""
    good = opened(HEAD + text.replace("GAIN", "1.0"), tmp_path).check()
    assert [loop.verdict for loop in good.loops] == ["as_declared", "stable"]
    assert (good.result, good.unstable_poles_all_open, good.unstable_poles_all_closed) == ("pass", 1, 0)
    poor = opened(HEAD + text.replace("GAIN", "0.1"), tmp_path).check()  # s - 0.5 + 0.2
    assert [loop.verdict for loop in poor.loops] == ["as_declared", "unstable"]
    assert (poor.result, poor.unstable_poles_all_closed) == ("fail", 1)


def test_all_closed_unstable_fails_even_if_every_loop_is_as_declared(tmp_path: Path) -> None:
    text = SingleLoop([0.5], [1.0, -1.0]).text() + "leaves_unstable = 1\n"
    result = opened(text, tmp_path).check()
    assert [loop.verdict for loop in result.loops] == ["as_declared"]
    assert (result.unstable_poles_all_closed, result.result) == (1, "fail")


def test_all_closed_undecided_makes_the_result_undecided(tmp_path: Path) -> None:
    result = SingleLoop([8.0], [1.0, 3.0, 3.0, 1.0]).opened(tmp_path).check()
    assert (result.unstable_poles_all_open, result.unstable_poles_all_closed) == (0, None)
    assert result.result == "undecided"


def test_a_hidden_pair_is_listed_once_with_positive_imaginary_part(tmp_path: Path) -> None:
    """(s^2 - 2 s + 5) cancelled across blocks: 1 +- 2j."""
    text = """
[blocks.plant]
numerator = [1.0]
denominator = [1.0, -2.0, 5.0]
[blocks.filter]
numerator = [1.0, -2.0, 5.0]
denominator = [1.0, 2.0, 1.0]
[signals]
e = "-y"
y = "plant*filter*e"
[[loops]]
name = "loop"
cut = "e"
"""
    result = opened(HEAD + text, tmp_path).check()
    (hidden,) = result.hidden_unstable_poles
    assert hidden.block == "plant"
    assert hidden.pole == pytest.approx(1 + 2j)
    assert result.loops[0].unstable_poles_after == 2
    assert result.result == "fail"


def test_a_hidden_pole_that_is_only_declared_has_no_place(tmp_path: Path) -> None:
    text = """
inputs = ["r"]
[blocks.odd]
formula = "1/(sqrt(s) - 1)"
unstable_poles = 1
[blocks.plant]
formula = "1/(s + 1)"
[signals]
e = "odd*r - y"
y = "plant*e"
[[loops]]
name = "loop"
cut = "e"
"""
    result = opened(HEAD + text, tmp_path).check()
    assert [(h.block, h.pole) for h in result.hidden_unstable_poles] == [("odd", None)]
    assert result.unstable_poles_all_closed == 1
    assert result.result == "fail"


# ---- crossings -------------------------------------------------------------------------------------------------------


def crossings(loop: LoopResult) -> list[tuple[float | None, float | None, int]]:
    return [(c.frequency, c.value, c.turns) for c in loop.real_axis_crossings]


def approximately(rows: list[tuple[float | None, float | None, int]]) -> list[tuple[object, object, int]]:
    return [(f if f is None else pytest.approx(f, rel=1e-7), v if v is None else pytest.approx(v, rel=1e-7), t)
            for f, v, t in rows]  # fmt: skip


def test_the_nearest_crossing_right_of_minus_one_has_no_turn(tmp_path: Path) -> None:
    """4/(s + 1)^3 passes -1/2 at sqrt(3)."""
    assert crossings(loop_of([4.0], [1, 3, 3, 1], tmp_path)) == approximately([(math.sqrt(3), -0.5, 0)])


def test_a_crossing_carries_the_turns_of_both_halves(tmp_path: Path) -> None:
    """16/(s + 1)^3 passes -2 at sqrt(3): two clockwise turns."""
    assert crossings(loop_of([16.0], [1, 3, 3, 1], tmp_path)) == approximately([(math.sqrt(3), -2.0, 2)])


def test_a_crossing_at_standstill_turns_once(tmp_path: Path) -> None:
    """2/(s - 1) starts at -2, against the clock."""
    assert crossings(loop_of([2.0], [1, -1], tmp_path)) == approximately([(0.0, -2.0, -1)])


def test_a_crossing_on_the_arc_round_a_pole_at_standstill(tmp_path: Path) -> None:
    """-1/(s(s + 1)): the arc passes the negative axis at standstill with L infinite: Z = 1."""
    loop = SingleLoop([1.0], [1.0, 1.0, 0.0], sign=-1).opened(tmp_path).loop("loop")
    assert loop.unstable_poles_after == 1
    assert crossings(loop) == [(0.0, None, 1)]


def test_a_crossing_on_the_arc_round_a_pair_on_the_axis(tmp_path: Path) -> None:
    """0.01/((s^2 + 1)(s + 1)): two turns on the arcs at 1 rad/s."""
    loop = loop_of([0.01], [1, 1, 1, 1], tmp_path)
    assert loop.unstable_poles_after == 2
    assert [c for c in crossings(loop) if c[2]] == [(pytest.approx(1.0, rel=1e-9), None, 2)]


def test_a_crossing_on_the_arc_at_infinity(tmp_path: Path) -> None:
    """L = -s is improper: 1 - s has a root at 1, one turn on the arc at infinity."""
    loop = SingleLoop([1.0, 0.0], [1.0], sign=-1).opened(tmp_path).loop("loop")
    assert loop.unstable_poles_after == 1
    assert crossings(loop) == [(None, None, 1)]


def test_a_curve_that_ends_left_of_minus_one_at_infinity(tmp_path: Path) -> None:
    """-(2s + 1)/(s + 3) ends at -2: 1 + L = (2 - s)/(s + 3), Z = 1, one turn approached at infinity."""
    loop = SingleLoop([2.0, 1.0], [1.0, 3.0], sign=-1).opened(tmp_path).loop("loop")
    assert loop.unstable_poles_after == 1
    assert [c for c in crossings(loop) if c[2]] == approximately([(None, -2.0, 1)])


def test_crossings_that_cancel_are_all_listed(tmp_path: Path) -> None:
    """5 (s + 1)^2/s^3 winds once each way: the arc at standstill, and -10 at 1 rad/s."""
    loop = loop_of([5.0, 10.0, 5.0], [1, 0, 0, 0], tmp_path)  # stable above K = 1/2
    assert (loop.windings, loop.unstable_poles_after) == (0, 0)
    turning = [c for c in crossings(loop) if c[2]]
    assert sum(c[2] for c in turning) == 0
    assert (pytest.approx(1.0), pytest.approx(-10.0), -2) in turning
    assert (0.0, None, 2) in turning


# ---- gain ranges and margins -----------------------------------------------------------------------------------------


def test_gain_ranges_run_from_zero_upward_on_top_of_the_gain(tmp_path: Path) -> None:
    """K/(s + 1)^3 with the file's gain 4 on K = 1: limits at K = 8, that is a factor 2."""
    loop = loop_of([1.0], [1, 3, 3, 1], tmp_path, gain=4.0)
    first, second = loop.gain_ranges
    assert (first.lower, first.unstable_poles, second.unstable_poles, second.upper) == (0.0, 0, 2, None)
    assert first.upper == second.lower == pytest.approx(2.0, rel=1e-9)


def test_a_loop_without_limits_has_one_range(tmp_path: Path) -> None:
    assert loop_of([1.0], [1.0, 1.0], tmp_path).gain_ranges == (GainRange(0.0, None, 0),)


def test_a_conditionally_stable_loop_has_both_gain_margins(tmp_path: Path) -> None:
    """K (s + 1)^2/s^3, stable for K > 1/2, then a far lag pair (0.01 s + 1)^2 sets an upper limit.

    s^3 (0.01 s + 1)^2 + K (s + 1)^2 on the axis: phase -270 + 2 atan(w) - 2 atan(w/100) = -180 gives
    atan(w) - atan(w/100) = 45 deg, 0.99 w = 1 + w^2/100, and K = w^3 (1 + w^2/10^4)/(1 + w^2).
    """
    loop = loop_of([5.0, 10.0, 5.0], [1e-4, 0.02, 1.0, 0, 0, 0], tmp_path)
    meets = [(99 - sign * math.sqrt(99**2 - 400)) / 2 for sign in (1, -1)]
    limits = [w**3 * (1 + w * w / 1e4) / (1 + w * w) / 5 for w in meets]
    assert loop.margins is not None
    assert loop.margins.gain_decrease is not None
    assert loop.margins.gain_increase is not None
    assert loop.margins.gain_decrease.factor == pytest.approx(limits[0], rel=1e-9)
    assert loop.margins.gain_increase.factor == pytest.approx(limits[1], rel=1e-9)
    assert loop.margins.gain_decrease.db == pytest.approx(-20 * math.log10(limits[0]), rel=1e-9)
    assert [r.unstable_poles for r in loop.gain_ranges] == [2, 0, 2]


def test_a_crossing_that_changes_no_count_is_no_limit(tmp_path: Path) -> None:
    """2/(s - 1) crosses nothing above: no upper gain limit, and the lower one lies at standstill."""
    loop = loop_of([2.0], [1, -1], tmp_path)
    assert loop.margins is not None
    assert loop.margins.gain_increase is None
    assert loop.margins.gain_decrease is not None
    assert (loop.margins.gain_decrease.factor, loop.margins.gain_decrease.frequency) == (pytest.approx(0.5), 0.0)


def test_with_dead_time_the_list_stops_after_the_second_change_above_1(tmp_path: Path) -> None:
    """K exp(-s)/s: changes at pi/2 + 2 pi n; from K = 9 the next two above are n = 2 and 3."""
    loop = loop_of([1.0], [1.0, 0.0], tmp_path, dead_time=1.0, gain=9.0)
    assert [r.unstable_poles for r in loop.gain_ranges] == [0, 2, 4, 6]
    assert loop.gain_ranges[-1].upper == pytest.approx((math.pi / 2 + 6 * math.pi) / 9, rel=1e-9)


def test_before_an_undecided_range_the_list_stops_and_still_limits_the_margin(tmp_path: Path) -> None:
    """0.5 exp(-s) (s+3)/(s+2) is neutral: at a factor 2 its count becomes infinite."""
    loop = loop_of([0.5, 1.5], [1.0, 2.0], tmp_path, dead_time=1.0)
    assert loop.gain_ranges[-1].upper is not None
    assert loop.gain_ranges[-1].upper <= 2.0 * (1 + 1e-9)


def test_phase_and_delay_are_the_smallest_over_all_crossovers(tmp_path: Path) -> None:
    """1/(s(s + 1)) alone: phase 51.83 deg at 0.786 rad/s, delay 1.1506 s."""
    loop = loop_of([1.0], [1, 1, 0], tmp_path)
    w = math.sqrt((math.sqrt(5) - 1) / 2)
    phase = 90 - math.degrees(math.atan(w))
    assert loop.margins is not None
    assert loop.margins.phase is not None
    assert loop.margins.delay is not None
    assert (loop.margins.phase.degrees, loop.margins.phase.direction) == (pytest.approx(phase, rel=1e-9), "lag")
    assert loop.margins.phase.frequency == pytest.approx(w, rel=1e-9)
    assert loop.margins.delay.seconds == pytest.approx(math.radians(phase) / w, rel=1e-9)


def test_a_lead_may_be_the_smaller_turn(tmp_path: Path) -> None:
    """0.5 s^2/((s^2 + 0.2 s + 1)(s + 1)): a circle turned upwards, whose lower crossover is the nearer one to -1."""
    denominator = np.polymul([1.0, 0.2, 1.0], [1.0, 1.0]).tolist()
    lower = crossovers([0.5, 0.0, 0.0], denominator)[0]
    angle = math.degrees(cmath.phase(-0.5 * lower**2 / np.polyval(denominator, 1j * lower)))
    loop = loop_of([0.5, 0.0, 0.0], denominator, tmp_path)
    assert loop.margins is not None
    assert loop.margins.phase is not None
    assert (loop.margins.phase.degrees, loop.margins.phase.direction) == (pytest.approx(180 - angle, rel=1e-7), "lead")
    assert loop.margins.phase.frequency == pytest.approx(lower, rel=1e-7)


def test_no_delay_is_allowed_where_the_gain_at_infinity_reaches_1(tmp_path: Path) -> None:
    """2(s + 1)/(s + 3) tends to 2: any dead time at all makes it neutral with gain above 1."""
    loop = loop_of([2.0, 2.0], [1.0, 3.0], tmp_path)
    assert loop.margins is not None
    assert loop.margins.delay is not None
    assert (loop.margins.delay.seconds, loop.margins.delay.frequency) == (0.0, None)


def test_peaks_at_standstill_and_infinity(tmp_path: Path) -> None:
    """9/(s + 1): |T| is largest at standstill, 0.9; |S| tends to 1 at infinity and is largest there."""
    loop = loop_of([9.0], [1.0, 1.0], tmp_path)
    assert loop.margins is not None
    T, S = loop.margins.complementary_peak, loop.margins.sensitivity_peak
    assert (T.value, T.frequency) == (pytest.approx(0.9, rel=1e-9), 0.0)
    assert (S.value, S.frequency) == (pytest.approx(1.0, rel=1e-9), None)
    assert T.db == pytest.approx(20 * math.log10(0.9), rel=1e-9)


def test_margins_are_null_when_unstable_or_undecided(tmp_path: Path) -> None:
    assert loop_of([9.0], [1, 3, 3, 1], tmp_path).margins is None
    assert loop_of([8.0], [1, 3, 3, 1], tmp_path).margins is None


def test_very_long_lists_keep_the_nearest_entries_with_a_warning(tmp_path: Path) -> None:
    """10,000 exp(-s)/s crosses the negative axis left of -1 some 1,590 times."""
    project = SingleLoop([1.0], [1.0, 0.0], 1.0, 1e4).opened(tmp_path)
    loop = project.loop("loop")
    assert loop.unstable_poles_after == 2 * (1 + math.floor((1e4 - math.pi / 2) / (2 * math.pi)))
    shown = json.loads(result_json(project.check()))
    crossings = shown["loops"][0]["real_axis_crossings"]
    assert len(crossings) == 1000
    assert min(crossing["value"] for crossing in crossings) > -2.8
    assert any("1,000" in w["message"] or "1000" in w["message"] for w in shown["warnings"])
