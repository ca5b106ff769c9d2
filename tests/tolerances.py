"""Tolerances with the reason for each; no test states one of its own.

identity
    Equal, bit for bit: no tolerance at all.
round-off
    A small number times machine precision times the number of operations.
method
    From the claimed order, where the error is asymptotic.
physics
    The stated accuracy of a check against the outside.
"""

import numpy as np

EPS = float(np.finfo(float).eps)

#: One transform or one matrix product of a few thousand points.
TRANSFORM = 100 * EPS


#: Books and norm after a run: rounding adds up at worst like the number of steps.
def books(steps: int) -> float:
    """Return the round-off allowed in a sum of probabilities after some steps."""
    return 20 * EPS * max(steps, 100)


#: Fitted order of a method against the claimed one.
ORDER = 0.05
