"""The systems of check_values.json as loops: each entry's own, and those that its formula describes in words."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from single_loop_files import SingleLoop

ENTRIES: dict[str, dict[str, Any]] = {
    entry["id"]: entry
    for entry in json.loads((Path(__file__).parent / "check_values.json").read_text(encoding="utf-8"))["entries"]
}


def lags(order: int) -> SingleLoop:
    """1/(s + 1)^order."""
    return SingleLoop([1.0], np.poly([-1.0] * order).tolist())


def tuned_pi(zero: float) -> SingleLoop:
    """The buck converter's voltage loop of A28 with its lead, times (1 + zero/s)."""
    base = ENTRIES["A28"]["system"]
    return SingleLoop(np.polymul(base["num"], [1.0, zero]).tolist(), [*base["den"], 0.0])


LEVEL = ENTRIES["A16"]["system"]
BUCK_W0 = 1 / math.sqrt(50e-6 * 500e-6)  # 1/sqrt(L C) of A28
BUCK_Q0 = 3.0 * math.sqrt(500e-6 / 50e-6)  # R sqrt(C/L)
A33_L2_NUMERATOR = [-1.7, -4.645, 6.2295, 13.1485, 11.33, 3.63]
A33_L2_DENOMINATOR = [3.63, 11.33, 13.1485, 6.2295, -4.645, -1.7]

# Beside the entry's own system ("", where check_values.json gives one): label -> system. Gains lie away from limits.
SYSTEMS: dict[str, dict[str, SingleLoop]] = {
    "A16": {
        "no delay": SingleLoop(LEVEL["num"], LEVEL["den"]),
        "K=16": SingleLoop([16.0], LEVEL["den"], 1.0),
    },
    "A17": {"K=100": SingleLoop([100.0], [1.0, 6.0, 5.0, 0.0])},
    "A18": {
        "plain": SingleLoop([40.0], [1.0, 2.0, 0.0]),
        "lead": SingleLoop([166.8, 735.588], [1.0, 20.4, 36.8, 0.0]),
    },
    "A25": {f"n={n}": lags(n) for n in (3, 4, 5, 6, 8)},
    "A26": {
        "zeta=0.5": SingleLoop([1.0], [1.0, 1.0, 0.0]),
        "zeta=0.7071": SingleLoop([1.0], [1.0, math.sqrt(2), 0.0]),
    },
    "A27": {"MO": SingleLoop([1.0], [2.0, 2.0, 0.0]), "SO": SingleLoop([4.0, 1.0], [8.0, 8.0, 0.0, 0.0])},
    "A28": {
        "uncompensated": SingleLoop([28.0 / 3 / 4], [1 / BUCK_W0**2, 1 / (BUCK_Q0 * BUCK_W0), 1.0]),
        "with PI": tuned_pi(2 * math.pi * 500),
    },
    "A31": {
        f"gain {gain:g}": SingleLoop([12000.0, 24000.0], [24.0, 1200.0, 0.0, 0.0], 0.008, gain)
        for gain in (1.5, 6.0, 12.68)
    },
    "A33": {
        "K1": SingleLoop([-1.0, 2.0], [2.0, -1.0]),
        "K2": SingleLoop(A33_L2_NUMERATOR, A33_L2_DENOMINATOR),
    },
    "B18": {f"theta={t}": SingleLoop([1.0], [1.0, -1.0], t, 1.08) for t in (0.2, 0.5, 0.9)},
    "B19": {
        "case 1": SingleLoop([1.0, 1.0], [1.0, 0.0, 1.0], gain=0.01),
        "case 2, K < 0": SingleLoop([1.0], [1.0, 1.0, 1.0, 1.0], gain=0.5, sign=-1),
        "case 2, K > 0": SingleLoop([1.0], [1.0, 1.0, 1.0, 1.0], gain=0.01),
        "case 3": SingleLoop([1.0], [1.0, 0.0, 1.0]),
    },
    "B21": {
        "lead": SingleLoop([1.0, 1.0], [0.25, 1.0, 0.0, 0.0]),
        "lag": SingleLoop([0.25, 1.0], [1.0, 1.0, 0.0, 0.0]),
    },
    "B23": {f"a={a:g}": SingleLoop([1.0], [1.0, a], 1.0, 0.9) for a in (1.0, 0.0, -0.5)},
    "B24": {f"K={K}": SingleLoop([1.0], [1.0, 0.0], 1.0, K) for K in (1.0, 1.570, 1.572)},
    "B25": {
        f"tau={tau} theta={theta}": SingleLoop([1.0], [float(tau), 1.0], theta)
        for tau, theta in ((1, 0.8), (1, 1), (5, 1), (10, 1), (1, 5))
    },
    "B29": {"K=1000": SingleLoop([1.0, 3.0], [1.0, 52.0, 100.0, 0.0, 0.0], gain=1000.0)},
    "D10": {"1/R = 0.05": SingleLoop([1e-4, 0.1], [1e-8, 1e-5, 1.0], gain=0.05, sign=-1)},
    "D11": {"P = 0": SingleLoop([25.0], [1.0, 10.0, 10.0, 10.0])},
}
for _entry in ("B07", "B09", "B16"):
    _own = ENTRIES[_entry]["system"]
    SYSTEMS[_entry] = {"K=10": SingleLoop(_own["num"], _own["den"], gain=10.0)}
# The entry's own system at a gain other than 1, where gain 1 lies on a limit or its negative side is meant.
OWN_GAIN = {"B11": 2.0, "B12": 2.0, "B13": 2.0, "B14": 2.0, "B22": 0.25}


def system(entry: str, label: str) -> SingleLoop:
    """The system of an entry: its own ("" or "K < 0": the same with the sign turned), or one of ``SYSTEMS``."""
    if label in SYSTEMS.get(entry, {}):
        return SYSTEMS[entry][label]
    own = ENTRIES[entry]["system"]
    loop = SingleLoop(own["num"], own["den"], own.get("delay", 0.0), OWN_GAIN.get(entry, 1.0))
    return replace(loop, sign=-1) if label == "K < 0" else loop
