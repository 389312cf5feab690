"""The terms of the screen, one sentence each, for the help page."""

from __future__ import annotations

TERMS: tuple[tuple[str, str], ...] = (
    ("L", "open-loop response of a loop: its cut opened, the loops inside closed, those outside open; gain included"),
    ("S, T", "S = 1/(1 + L): how disturbances remain; T = L/(1 + L): how commands pass"),
    ("−1", "the critical point: where L passes through it, a closed-loop pole lies on the imaginary axis"),
    ("P", "poles of the loop's part of the diagram right of the imaginary axis before the loop closes"),
    ("N", "net clockwise turns of L round −1, both halves of the frequency axis together"),
    ("Z", "poles right of the axis with the loop closed: Z = P + N; stable means Z = 0"),
    ("strands", "│ an unstable pole; ┴ the loop catches it; ┬ the loop creates it; what hangs below the last is left"),
    ("as declared", "the loop leaves unstable or axis poles, and the file says that it should"),
    ("undecided", "the count cannot be proved either way; where and why is said; nothing is claimed"),
    ("proved", "the count holds on the whole contour for the models as written"),
    ("declared", "proved, given pole counts that the file states and nobody can check"),
    ("data", "measured: holds if the response between two lines stays as near to their chord as the file states"),
    ("gain increase", "how far the gain can rise before Z changes; gain decrease: how far it can fall"),
    ("phase margin", "the least turn of L, either way, that changes Z"),
    ("delay margin", "the least added dead time that changes Z"),
    ("modulus margin", "the least |1 + L|: how near L comes to −1; the forbidden disc is its limit"),
    ("peaks", "the largest |S| and |T|; a large one means ringing and little room"),
    ("crossover", "a frequency where |L| = 1"),
    ("turns", "a crossing of the real axis left of −1; their running sum ends at N"),
    ("folded plane", "the whole plane drawn in a disc: its rim is infinity"),
    ("trial gain", "a gain that differs from the file's, marked and drawn over the file's dim curve; never saved to the file"),
    ("rounding", "to the safe side: margins down, peaks up"),
)
