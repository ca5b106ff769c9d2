"""Stationary scattering by integrating the differential equation itself."""

from collections.abc import Callable, Sequence

import numpy as np
from scipy import integrate


def scatter(
    potential: Callable[[float], float],
    energy: float,
    c: float,
    edges: Sequence[float],
    *,
    c_inside: float | None = None,
) -> tuple[float, float]:
    """Return T and R of a particle from the left, by an 8th-order Runge-Kutta method.

    -(c psi')' + V psi = E psi is integrated leftwards through ``edges`` (rising; V may
    jump there) from the outgoing wave. Beyond the outer edges V is taken as constant;
    ``c_inside`` holds between the edges.
    """
    inside = c if c_inside is None else c_inside
    k_left = np.sqrt((energy - potential(edges[0] - 1e-9)) / c)
    k_right = np.sqrt((energy - potential(edges[-1] + 1e-9)) / c)

    def slope(x: float, y: np.ndarray) -> np.ndarray:
        return np.array([y[1] / inside, (potential(x) - energy) * y[0]])

    state = np.array([1.0, 1j * c * k_right], dtype=complex)
    for right, left in zip(edges[:0:-1], edges[-2::-1], strict=True):
        shrink = 1e-13 * (right - left)  # keeps evaluations off the jump
        end = integrate.solve_ivp(
            slope, (right - shrink, left + shrink), state,
            method="DOP853", rtol=3e-13, atol=1e-14,
        )  # fmt: skip
        state = end.y[:, -1]
    incoming = (state[0] + state[1] / (1j * c * k_left)) / 2
    reflected = (state[0] - state[1] / (1j * c * k_left)) / 2
    return (
        float(k_right / k_left / abs(incoming) ** 2),
        float(abs(reflected / incoming) ** 2),
    )
