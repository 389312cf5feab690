"""Double-precision rounding: the unit roundoff, what is charged for it, outward helpers, and the assumption it rests
on.

Every proof of this program is conditional on one statement about the machine: additions, products, quotients and square
roots of doubles are rounded to nearest (IEEE 754), and the elementary functions named in ``_REFERENCE`` err by at most
4 units in the last place (8 u of the result, complex results normwise). ``check_elementary_functions`` holds the
statement against a fixed table once per process. Normwise bounds of complex products and quotients: R. P. Brent, C.
Percival, P. Zimmermann, "Error bounds on complex floating-point multiplication", Math. Comp. 76 (2007) 1469-1481:
sqrt(5) u; quotients below 8 u.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from encircle.engine.result import FloatArray

UNIT = 2.0**-53
SLACK = 8.0 * UNIT  # one complex product or quotient, or one elementary function (4 units in the last place)
TINY = 1e-280  # added to every radius: more than all that underflow can lose


def outward(radius: FloatArray) -> FloatArray:
    """Round a radius up: covers 60 roundings in its own computation, and underflow."""
    return radius * (1.0 + 64.0 * UNIT) + TINY


def inflated_half(centre: FloatArray, half: FloatArray) -> FloatArray:
    """Half widths rounded outward so that neighbouring cells overlap."""
    inflated: FloatArray = half * (1.0 + 4.0 * UNIT) + 4.0 * UNIT * np.abs(centre)
    return inflated


@cache
def check_elementary_functions() -> None:
    """Hold the elementary functions of this machine against the table; runs once per process, about 1 ms.

    Raises ArithmeticError naming the first function that misses: no count is a proof on such a machine.
    """
    for name, (function, arguments, references) in _REFERENCE.items():
        if not agrees(function, arguments, references):
            raise ArithmeticError(f"the function {name} of this machine errs by more than 4 units in the last place")


def agrees(function: Callable[..., Any], arguments: tuple[Any, ...], references: list[Any]) -> bool:
    """Whether function(*arguments) lies within 4 units in the last place of the references.

    The columns are repeated, so that vector instructions and the scalar remainder loop both take part.
    """
    columns = [np.tile(np.array(column), 5) for column in arguments]
    expected = np.tile(np.array(references), 5)
    with np.errstate(all="ignore"):
        return bool(np.all(np.abs(function(*columns) - expected) <= 4.0 * np.spacing(np.abs(expected))))


_ANY = [
    0.001, 0.1, 0.7853981633974483, 1.0, 2.5, 10.0, 100.25, -3.75, 12345.678, 1e6, 3.3e9, -0.5, 5.5, -20.125, 1.25e-08,
]  # fmt: skip
_MODERATE = [x for x in _ANY if abs(x) < 700.0]
_POSITIVE = [1e-300, 1e-10, 0.3, 0.5, 1.5, 2.0, 3.0, 7.25, 1000.1, 1e10, 6.02e23, 1e300]
_COMPLEX = [-3 + 4j, 0.1 + 0.2j, 1e-5 + 2j, 2 - 1000j, -20 + 1.5j, 0.3 - 0.1j, -0.5 + 12345.678j, 5 + 3j]

# name: function, columns of arguments, correctly rounded results (computed with 40 digits)
_REFERENCE: dict[str, tuple[Callable[..., Any], tuple[Any, ...], list[Any]]] = {
    "sin": (np.sin, (_ANY,), [
        0.0009999998333333417, 0.09983341664682815, 0.7071067811865475, 0.8414709848078965, 0.5984721441039565,
        -0.5440211108893698, -0.2772828564548513, 0.5715613187423437, -0.7040813137533816, -0.34999350217129294,
        0.9571764121088295, -0.479425538604203, -0.7055403255703919, -0.9566996703359257, 1.25e-08,
    ]),
    "cos": (np.cos, (_ANY,), [
        0.9999995000000417, 0.9950041652780258, 0.7071067811865476, 0.5403023058681398, -0.8011436155469337,
        -0.8390715290764524, 0.9607883312760612, -0.8205593573395608, 0.7101193587160628, 0.9367521275331447,
        0.2895052954653303, 0.8775825618903728, 0.70866977429126, 0.2910768640396056, 0.9999999999999999,
    ]),
    "exp": (np.exp, (_MODERATE,), [
        1.0010005001667084, 1.1051709180756477, 2.1932800507380152, 2.718281828459045, 12.182493960703473,
        22026.465794806718, 3.451610733125924e43, 0.023517745856009107, 0.6065306597126334, 244.69193226422038,
        1.8189616875530459e-09, 1.0000000125000001,
    ]),
    "expm1": (np.expm1, (_MODERATE,), [
        0.0010005001667083417, 0.10517091807564763, 1.1932800507380155, 1.7182818284590453, 11.182493960703473,
        22025.465794806718, 3.451610733125924e43, -0.9764822541439909, -0.3934693402873666, 243.69193226422038,
        -0.9999999981810384, 1.2500000078125e-08,
    ]),
    "sqrt": (np.sqrt, (_POSITIVE,), [
        1e-150, 1e-05, 0.5477225575051661, 0.7071067811865476, 1.224744871391589, 1.4142135623730951,
        1.7320508075688772, 2.692582403567252, 31.62435770098738, 1e5, 775886589650.8329, 1e150,
    ]),
    "power 0.5": (lambda x: np.power(x, 0.5), (_POSITIVE[1:-1],), [
        1e-05, 0.5477225575051661, 0.7071067811865476, 1.224744871391589, 1.4142135623730951, 1.7320508075688772,
        2.692582403567252, 31.62435770098738, 1e5, 775886589650.8329,
    ]),
    "power -0.75": (lambda x: np.power(x, -0.75), (_POSITIVE[1:-1],), [
        31622776.60168379, 2.4669426816409508, 1.681792830507429, 0.7377879464668811, 0.5946035575013605,
        0.4386913376508308, 0.22633227826974422, 0.005622991532809865, 3.162277660168379e-08, 1.4631964256415628e-18,
    ]),
    "power 3.1": (lambda x: np.power(x, 3.1), (_POSITIVE[1:-1],), [
        9.999999999999981e-32, 0.023937340065260753, 0.11662912394210093, 3.514656635974386, 8.574187700290345,
        30.135325698915423, 464.5664260346934, 1995880911.234691, 1.000000000000002e31, 5.208937216516676e73,
    ]),
    "arctan2": (np.arctan2, (_ANY, [1.0] * len(_ANY)), [
        0.0009999996666668668, 0.09966865249116204, 0.6657737500283538, 0.7853981633974483, 1.1902899496825317,
        1.4711276743037347, 1.5608215952767879, -1.3101939350475555, 1.5707153267884317, 1.5707953267948966,
        1.5707963264918663, -0.4636476090008061, 1.3909428270024184, -1.5211477204062904, 1.25e-08,
    ]),
    "arcsin": (np.arcsin, ([0.001, 0.1, 0.7853981633974483, 1.0, -0.5, 0.34657359027997264, 1.25e-08],), [
        0.0010000001666667416, 0.1001674211615598, 0.9033391107665127, 1.5707963267948966, -0.5235987755982989,
        0.3539158271449871, 1.25e-08,
    ]),
    "complex exp": (np.exp, (_COMPLEX,), [
        -0.032542999640154786 - 0.03767897757486585j, 1.0831410796080632 + 0.21956356670825236j,
        -0.4161509980363153 + 0.909306519845415j, 4.155450543576804 - 6.109859312048967j,
        1.4580023945855266e-10 + 2.0559904050032476e-09j, 1.3431151360753522 - 0.13476101675112576j,
        0.4307091631167657 - 0.4270469037221762j, -146.92791390831894 + 20.944066208745966j,
    ]),
    "complex sqrt": (np.sqrt, (_COMPLEX,), [
        1 + 2j, 0.4022479320953552 + 0.24860289393928922j, 1.000002500003125 + 0.999997500003125j,
        22.383051623918487 - 22.338330286729132j, 0.16758746989494633 + 4.475274914467914j,
        0.5550800690066424 - 0.09007709480450048j, 78.56582593636053 + 78.56900791700568j,
        2.3271175190399496 + 0.6445742373246469j,
    ]),
    "modulus": (np.abs, (_COMPLEX[:2],), [5.0, 0.223606797749979]),
}  # fmt: skip
