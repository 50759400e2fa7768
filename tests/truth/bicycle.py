"""The Whipple bicycle about upright running: lean and steer, speed a parameter.

J. P. Meijaard, J. M. Papadopoulos, A. Ruina, A. L. Schwab, "Linearized dynamics equations for the balance and steer of
a bicycle: a benchmark and review", Proc. R. Soc. A 463 (2007) 1955-1982, doi 10.1098/rspa.2007.1857. Matrices (section
5.3) and eigenvalues (table 2) seen in public transcriptions.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

M = np.array([[80.81722, 2.31941332208709], [2.31941332208709, 0.29784188199686]])
C1 = np.array([[0.0, 33.86641391492494], [-0.85035641456978, 1.68540397397560]])
K0 = np.array([[-80.95, -2.59951685249872], [-2.59951685249872, -0.80329488458618]])
K2 = np.array([[0.0, 76.59734589573222], [0.0, 2.65431523794604]])
GRAVITY = 9.81

# speed -> castering, capsize, weave (real, imaginary); real pairs where the imaginary part is None
TABLE = {
    0: (-5.53094371765393, -3.13164324790656, 3.13164324790656, 5.53094371765393),
    1: (-7.11008014637442, -3.13423125066578, 3.52696170990070 + 0.80774027519930j),
    2: (-8.67387984831735, -3.07158645641514, 2.68234517512745 + 1.68066296590675j),
    3: (-10.35101467245920, -2.63366137253667, 1.70675605663975 + 2.31582447384325j),
    4: (-12.15861426576450, -1.42944427361326, 0.41325331521125 + 3.07910818603206j),
    5: (-14.07838969279820, -0.32286642900409, -0.77534188219585 + 4.46486771378823j),
    6: (-16.08537123098030, -0.00406690076970, -1.52644486584142 + 5.87673060598709j),
    7: (-18.15788466125262, 0.10268170574766, -2.13875644258362 + 7.19525913329805j),
    8: (-20.27940894394569, 0.14327879765713, -2.69348683581097 + 8.46037971396931j),
    9: (-22.43788559040858, 0.15790184030917, -3.21675402252485 + 9.69377351531791j),
    10: (-24.62459635017404, 0.16105338653172, -3.72016840437287 + 10.90681139476287j),
}
WEAVE_SPEED, WEAVE_FREQUENCY, CAPSIZE_SPEED = 4.29238253634111, 3.43503384866144, 6.02426201538837
DOUBLE_SPEED, DOUBLE_ROOT = 0.68428307889246, 3.78290405129320


def matrix(speed: float) -> np.ndarray:
    """A of the states lean, steer and their rates."""
    stiffness, damping = GRAVITY * K0 + speed**2 * K2, speed * C1
    return np.block([[np.zeros((2, 2)), np.eye(2)], [-np.linalg.solve(M, stiffness), -np.linalg.solve(M, damping)]])


def eigenvalues(speed: int) -> list[complex]:
    """The four of table 2."""
    listed = [complex(value) for value in TABLE[speed]]
    return listed + [value.conjugate() for value in listed if value.imag]


def dynamics(t, x, u, p):
    A = matrix(p["speed"])
    inverse = np.linalg.inv(M)
    lean, steer, lean_rate, steer_rate = x
    push = inverse[:, 1:] * u[0] if x.ndim == 2 else inverse[:, 1] * u[0]
    # sines keep lean and steer nonlinear without changing what holds upright
    bent = np.stack([np.sin(lean), np.sin(steer), lean_rate, steer_rate])
    rates = A[2:] @ bent + push
    return np.stack([lean_rate, steer_rate, rates[0], rates[1]])


bicycle = Plant(
    states={"lean": "rad", "steer": "rad", "lean_rate": "rad/s", "steer_rate": "rad/s"},
    inputs={"steer_torque": "N*m"},
    outputs={"lean": "rad"},
    parameters={"speed": (5.0, "m/s")},
    dynamics=dynamics,
)
