"""The terms of the screen, one sentence each, for the help page."""

from __future__ import annotations

TERMS: tuple[tuple[str, str], ...] = (
    ("L", "open-loop response, gain included: its cut open, loops inside closed, loops outside open"),
    ("S, T", "1/(1 + L), what disturbances leave; L/(1 + L)"),
    ("−1", "where L passes, a closed-loop pole is on the axis"),
    ("P", "poles right of the axis (unstable) before closing"),
    ("N", "net clockwise turns of L round −1, both halves"),
    ("Z", "unstable poles after closing, P + N; stable: Z = 0"),
    ("strands", "│ unstable pole ┴ caught by the loop ┬ made by it; what hangs below the outermost loop is left"),
    ("* ▲ ▼", "gain on trial; grown, shrunk against the file"),
    ("○ ◇ ●", "crossover, margin, cursor; disc: a limit forbids it"),
    ("as declared", "leaves the poles that the file says it should"),
    ("undecided", "cannot be proved either way; nothing is claimed"),
    ("proved", "the count holds on the whole contour, for models"),
    ("declared", "as proved, resting on pole counts the file states"),
    ("data", "measured: rests on what is assumed between lines"),
    ("gain up", "rise of the gain that changes Z; gain down: its fall; both: the smaller; ∞: no change, however far"),
    ("phase", "least turn of L, either way, that changes Z"),
    ("delay", "least added dead time that changes Z"),
    ("modulus", "least |1 + L|: how near L comes to −1"),
    ("peak", "largest |S|, |T|; large: ringing, little room"),
    ("crossover", "where |L| = 1"),
    ("turns", "crossings of the axis left of −1; their sum is N"),
    ("folded", "the whole plane as a disc; its rim is infinity"),
    ("mark", "a crossing, crossover, margin or peak"),
    ("trial", "gains other than the file's, which never changes; its curve stays, dim, behind the trial's"),
    ("rounding", "to the safe side: margins down, peaks up"),
)
