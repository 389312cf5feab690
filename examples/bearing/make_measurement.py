"""Write flexible_mode.csv: an invented "tap test" of the rotor, so that the example needs no real data.

The rotor hangs freely; force at the magnet plane, deflection at the sensor plane, the rigid-body part already taken
off. Two bending modes and a little noise, always the same (fixed seed). Run: python make_measurement.py
"""

from pathlib import Path

import numpy as np

# natural frequency (Hz), damping ratio, modal mass (kg); a negative mass: sensor and magnet on opposite sides of a node
MODES = ((215.0, 0.006, 16.0), (690.0, 0.008, -60.0))
NOISE = 2e-4  # of the local magnitude, in both parts: a long average
SEED = 14839


def compliance(frequency: np.ndarray) -> np.ndarray:
    """Deflection per force, m/N, at frequencies in Hz: the sum of 1/(m (s^2 + 2 zeta w s + w^2)) over the modes."""
    s = 2j * np.pi * frequency
    natural = 2 * np.pi * np.array([mode[0] for mode in MODES])
    damping = np.array([mode[1] for mode in MODES])
    mass = np.array([mode[2] for mode in MODES])
    return (1 / (mass * (s[:, None] ** 2 + 2 * damping * natural * s[:, None] + natural**2))).sum(axis=1)


def test_lines() -> np.ndarray:
    """Lines in Hz: coarse where the response is smooth, every 0.1 half-width where a mode turns the phase."""
    sweep = np.geomspace(2.0, 3000.0, 400)
    zooms = [f * (1 + zeta * np.sinh(np.linspace(-4.0, 4.0, 181))) for f, zeta, _ in MODES]
    return np.unique(np.round(np.concatenate([sweep, *zooms]), 3))


def main() -> None:
    frequency = test_lines()
    noise = np.random.default_rng(SEED).normal(size=(2, frequency.size))
    H = compliance(frequency)
    H = H + NOISE * np.abs(H) * (noise[0] + 1j * noise[1])
    lines = [f"{f:.3f},{h.real:.6e},{h.imag:.6e}" for f, h in zip(frequency, H, strict=True)]
    header = ["# invented tap test: rotor hanging freely, force at the magnet, deflection at the sensor, m/N"]
    path = Path(__file__).with_name("flexible_mode.csv")
    path.write_text("\n".join([*header, "frequency_hz,real,imag", *lines]) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
