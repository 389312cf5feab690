"""Results made by hand for tests that need no engine.

The drive's figures are those of the worked example of the project file format; the others are invented.
"""

from __future__ import annotations

from dataclasses import replace

from encircle.engine.errors import Problem
from encircle.engine.result import (
    AxisPole,
    DelayMargin,
    GainMargin,
    GainRange,
    HiddenPole,
    LimitFinding,
    LoopResult,
    Margins,
    MeasuredFile,
    ModulusMargin,
    Peak,
    PhaseMargin,
    PoleOwner,
    RealAxisCrossing,
    Result,
    UndecidedStretch,
)

CURRENT_MARGINS = Margins(
    gain_increase=GainMargin(6.29286, 15.9770, 2267.25),
    gain_decrease=None,
    phase=PhaseMargin(71.2641, "lag", 379.181),
    delay=DelayMargin(5.22062e-4, 379.181),
    modulus=ModulusMargin(0.793289, 1312.92),
    sensitivity_peak=Peak(1.26058, 2.01137, 1312.92),
    complementary_peak=Peak(1.03100, 0.265157, 108.373),
    gain_crossovers=(379.181,),
)

CURRENT = LoopResult(
    name="current",
    cut="current_error",
    gain=1.0,
    verdict="stable",
    windings=0,
    unstable_poles_before=0,
    unstable_poles_after=0,
    pole_owners=(),
    axis_poles_left=(AxisPole("current_controller", 0.0),),
    evidence="proved",
    assumptions=(),
    undecided=(),
    real_axis_crossings=(RealAxisCrossing(2267.25, -0.158910, 0),),
    gain_ranges=(GainRange(0.0, 6.29286, 0), GainRange(6.29286, 59.0825, 2)),
    margins=CURRENT_MARGINS,
    limits=(LimitFinding("gain_margin_db", 6, 15.9770, True), LimitFinding("phase_margin_deg", 45, 71.2641, True)),
    blocks=("amplifier", "coil", "current_controller", "rotor"),
    leaves_unstable=None,
    leaves_on_axis=None,
)

SPEED = replace(
    CURRENT,
    name="speed",
    cut="speed_error",
    axis_poles_left=(),
    real_axis_crossings=(),
    gain_ranges=(GainRange(0.0, 38.9593, 0),),
    margins=Margins(
        gain_increase=GainMargin(38.9593, 31.8123, 337.132),
        gain_decrease=None,
        phase=PhaseMargin(69.7287, "lag", 12.9695),
        delay=DelayMargin(0.0149343, 12.9695),
        modulus=ModulusMargin(0.943533, 112.246),
        sensitivity_peak=Peak(1.05985, 0.504872, 112.246),
        complementary_peak=Peak(1.20444, 1.615680, 5.42974),
        gain_crossovers=(12.9695,),
    ),
    limits=(
        LimitFinding("gain_margin_db", 6, 31.8123, True),
        LimitFinding("phase_margin_deg", 50, 69.7287, True),
        LimitFinding("modulus_margin", 0.5, 0.943533, True),
    ),
)

DRIVE = Result(
    program="encircle 0.1.0",
    title="Rewinder drive",
    file="rewinder.toml",
    sha256="ab" * 32,
    measured=(),
    frequency_unit="Hz",
    result="pass",
    uncut_feedback=(("coil", "rotor"),),
    unstable_poles_all_open=0,
    unstable_poles_all_closed=0,
    hidden_unstable_poles=(),
    loops=(CURRENT, SPEED),
    warnings=(),
)

MISSING = replace(
    SPEED,
    name="position",
    cut="position_error",
    margins=replace(CURRENT_MARGINS, gain_decrease=GainMargin(0.41234, 7.69503, 1.5), gain_crossovers=(3.0, 9.0, 20.0)),
    limits=(
        LimitFinding("phase_margin_deg", 72, 71.2641, False),
        LimitFinding("sensitivity_peak_db", 2, 2.01137, False),
        LimitFinding("crossover_max", 25, 20.0, True),
        LimitFinding("gain_decrease_db", 6, 7.69503, True),
    ),
)

UNSTABLE = replace(
    CURRENT,
    name="level",
    verdict="unstable",
    windings=1,
    unstable_poles_before=1,
    unstable_poles_after=2,
    pole_owners=(PoleOwner("vessel", "block", 1),),
    axis_poles_left=(),
    real_axis_crossings=(RealAxisCrossing(0.0, None, -1), RealAxisCrossing(2.5, -3.21987, 2)),
    gain_ranges=(GainRange(0.0, 0.310564, 0), GainRange(0.310564, None, 2)),
    margins=None,
    limits=(LimitFinding("phase_margin_deg", 45, None, False), LimitFinding("gain_margin_db", 6, None, False)),
)

UNDECIDED = replace(
    CURRENT,
    name="bearing",
    verdict="undecided",
    windings=None,
    unstable_poles_before=1,
    unstable_poles_after=None,
    evidence="none",
    axis_poles_left=(),
    undecided=(
        UndecidedStretch(212.0, 218.5, "the chord between two lines passes -1; lines 0.4 Hz apart would decide"),
        UndecidedStretch(3000.0, None, "no roll-off is stated above the last line of flexible.csv"),
    ),
    real_axis_crossings=(),
    gain_ranges=(),
    margins=None,
    limits=(LimitFinding("sensitivity_peak_db", 9.5, None, None),),
)

AS_DECLARED = replace(
    CURRENT,
    name="coil",
    verdict="as_declared",
    windings=0,
    unstable_poles_before=1,
    unstable_poles_after=1,
    pole_owners=(PoleOwner("current", "loop", 1),),
    leaves_unstable=1,
)

TROUBLED = replace(
    DRIVE,
    title="Troubles \x1b[31mred",
    result="fail",
    loops=(AS_DECLARED, UNSTABLE, UNDECIDED, MISSING),
    unstable_poles_all_open=1,
    unstable_poles_all_closed=3,
    hidden_unstable_poles=(HiddenPole("vessel", 0.0015 + 0j), HiddenPole("fan", 1 + 2j), HiddenPole("bending", None)),
    measured=(MeasuredFile("bending", "flexible.csv", "cd" * 32, 812, 2.0, 3000.0),),
    warnings=(
        Problem(
            "equal-poles",
            "blocks.vessel",
            "rewinder.toml, [blocks.vessel]: the pole at 0.0015 rad/s stands in `fan` too",
        ),
    ),
)
