"""A plant file that stops on its third statement."""

import math

tank = math.sqrt(-1.0)
