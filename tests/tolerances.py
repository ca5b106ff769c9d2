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


def norm(steps: int) -> float:
    """Return the round-off allowed in the norm after some steps without absorption.

    A step multiplies by a few factors of modulus one, each rounded to half a unit
    in the last place and the same at every step: at worst the errors add up.
    """
    return 4 * EPS * steps


#: A state that went 20,000 steps forth and as many back.
REVERSED = 1e-9

#: Two propagations that differ only in how they round: a few hundred steps, each
#: with two transforms, and phases of up to some hundred radians rounded once.
TWIN = 1e-10

#: Probability on the grid, absorbed and elsewhere, at every record.
BALANCE = 1e-10

#: Error of the books against the flux when spacing and step are halved: four times
#: less at order 2, and less than asymptotic on the coarser of two grids.
FALL = 3.0

#: Stationary integration of order 8: some hundred steps, each to 1e-10 of its amplitude.
INTEGRATED = 2e-9

#: Coupled modes extrapolated from two spacings of 16 and 24 points a wave, smooth potential.
GUIDED = 1e-6
