"""A large transport aircraft in level flight at 40 000 ft and Mach 0.8, about trim: ft, s, rad.

R. K. Heffley, W. F. Jewell, Aircraft Handling Qualities Data, NASA CR-2144, 1972, used by B. Etkin, L. D. Reid,
Dynamics of Flight: Stability and Control, 3rd ed., Wiley 1996, chapter 6. Longitudinal matrix and elevator seen in
public transcriptions; its modes, the lateral matrix and its roots are values from memory.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

LONGITUDINAL = np.array(
    [
        [-0.006868, 0.01395, 0.0, -32.2],
        [-0.09055, -0.3151, 773.98, 0.0],
        [0.0001187, -0.001026, -0.4285, 0.0],
        [0.0, 0.0, 1.0, 0.0],
    ]
)
ELEVATOR = np.array([-0.000187, -17.85, -1.158, 0.0])
LATERAL = np.array(
    [
        [-0.0558, 0.0, -774.0, 32.2],
        [-0.003865, -0.4342, 0.4136, 0.0],
        [0.001086, -0.006112, -0.1458, 0.0],
        [0.0, 1.0, 0.0, 0.0],
    ]
)
ROLLING = np.array([0.0, 0.1431, 0.0, 0.0])  # of an aileron, invented: it does not enter the roots

# from memory, to their last digits
PHUGOID, SHORT_PERIOD = -0.003289 + 0.06723j, -0.3719 + 0.8875j
SPIRAL, ROLL, DUTCH_ROLL = -0.0072973, -0.56248, -0.033011 + 0.94655j


def _moving(matrix: np.ndarray, column: np.ndarray):
    def dynamics(t, x, u, p):
        return matrix @ x + np.multiply.outer(column, u[0])

    return dynamics


longitudinal = Plant(
    states={"u": "ft/s", "w": "ft/s", "q": "rad/s", "theta": "rad"},
    inputs={"elevator": "rad"},
    dynamics=_moving(LONGITUDINAL, ELEVATOR),
    nominal={"u": 50.0, "w": 50.0, "q": 0.1, "theta": 0.1, "elevator": 0.1},
)
lateral = Plant(
    states={"v": "ft/s", "p": "rad/s", "r": "rad/s", "phi": "rad"},
    inputs={"aileron": "rad"},
    dynamics=_moving(LATERAL, ROLLING),
    nominal={"v": 50.0, "p": 0.1, "r": 0.1, "phi": 0.1, "aileron": 0.1},
)
