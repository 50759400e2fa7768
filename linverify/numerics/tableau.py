"""Coefficients of the explicit Dormand-Prince pair 5(4), with its continuous extension of order 4.

J. R. Dormand, P. J. Prince 1980, "A family of embedded Runge-Kutta formulae", J. Comp. Appl. Math. 6(1), 19-26; the
extension in E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary Differential Equations I, section II.6.
"""

from __future__ import annotations

import numpy as np

from ..core.model import frozen_array

NODES = frozen_array([0, 1 / 5, 3 / 10, 4 / 5, 8 / 9, 1, 1])
STAGES = (
    frozen_array([1 / 5]),
    frozen_array([3 / 40, 9 / 40]),
    frozen_array([44 / 45, -56 / 15, 32 / 9]),
    frozen_array([19372 / 6561, -25360 / 2187, 64448 / 6561, -212 / 729]),
    frozen_array([9017 / 3168, -355 / 33, 46732 / 5247, 49 / 176, -5103 / 18656]),
    frozen_array([35 / 384, 0, 500 / 1113, 125 / 192, -2187 / 6784, 11 / 84]),
)
# weights of order 5 minus weights of order 4
ERROR = frozen_array(
    np.array([35 / 384, 0, 500 / 1113, 125 / 192, -2187 / 6784, 11 / 84, 0])
    - np.array([5179 / 57600, 0, 7571 / 16695, 393 / 640, -92097 / 339200, 187 / 2100, 1 / 40])
)
# fourth-order part of the continuous extension
DENSE = frozen_array(
    [
        -12715105075 / 11282082432,
        0,
        87487479700 / 32700410799,
        -10690763975 / 1880347072,
        701980252875 / 199316789632,
        -1453857185 / 822651844,
        69997945 / 29380423,
    ]
)
