"""What packets that travel share: directions, lines, the potential where they start."""

import math
from collections.abc import Mapping, Sequence
from typing import Final

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.axis import Axis
from wavepack.physics.packet_shapes import Packet, Scene
from wavepack.physics.potentials import total
from wavepack.physics.shapes import Converter, Faults

#: Directions with a name, as angles from +x towards +y.
DIRECTIONS: Final = {"+x": 0.0, "+y": math.pi / 2, "-x": math.pi, "-y": -math.pi / 2}


def read_direction(raw: object, units: Converter) -> float:
    """Return a direction as an angle [radians] from +x towards +y.

    Raises
    ------
    ValueError
        If it is neither a name nor an angle with its unit.
    """
    if isinstance(raw, str) and raw.strip() in DIRECTIONS:
        return DIRECTIONS[raw.strip()]
    try:
        if isinstance(raw, str):
            return units.convert(raw, "angle")
    except ValueError as error:
        wanted = f"need {', '.join(DIRECTIONS)} or an angle with deg or rad"
        raise ValueError(f"{wanted}, got {raw!r} ({error})") from None
    raise ValueError(f"need {', '.join(DIRECTIONS)} or an angle with deg or rad, got {raw!r}")


def write_direction(value: float | None) -> str | None:
    """Return a direction as `read_direction` reads it."""
    names = {angle: name for name, angle in DIRECTIONS.items()}
    return None if value is None else names.get(value, f"{value!r} rad")


def unit_vector(direction: float) -> tuple[float, float]:
    """Return (cos, sin) of an angle, exact along the axes."""
    quarters = direction / (math.pi / 2)
    if abs(quarters - round(quarters)) < 1e-12:
        return ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))[round(quarters) % 4]
    return math.cos(direction), math.sin(direction)


def gaussian_line(axis: Axis, center: float, sigma: float, k: float) -> ComplexArray:
    r"""Return :math:`e^{-(x-x_0)^2/4\sigma^2 + ik(x-x_0)}` along one axis.

    On a periodic axis its images a period apart add up.
    """
    reach = math.ceil(13 * sigma / axis.length) if "periodic" in axis.ends else 0
    psi = np.zeros(axis.points, dtype=complex)
    for image in range(-reach, reach + 1):
        x = axis.coordinates - center + image * axis.length
        psi += np.exp(-np.minimum((x / (2 * sigma)) ** 2, 700.0) + 1j * k * x)
    return psi


def nearest_row(scene: Scene, center: Sequence[float], axis: int) -> RealArray:
    """Return V [energy] at t = 0 on the points of a plane across one axis, near a center."""
    line = scene.grid.axes[axis]
    i = int(np.argmin(np.abs(line.coordinates - center[axis])))
    if axis == 0:
        return np.asarray(total(scene.pieces, scene.grid, scene.particle, rows=slice(i, i + 1))[0])
    return np.asarray(total(scene.pieces, scene.grid, scene.particle)[:, i])


def potential_at(scene: Scene, center: Sequence[float]) -> float:
    """Return V [energy] at t = 0 at the point nearest to a center."""
    row = nearest_row(scene, center, 0)
    if scene.grid.ndim == 1:
        return float(row)
    return float(row[np.argmin(np.abs(scene.grid.axes[1].coordinates - center[1]))])


def energy_faults(packet: Packet, given: Sequence[str]) -> Faults:
    """Return the fault of a momentum given not at all or twice."""
    ways = [key for key in given if getattr(packet, key) not in (None, {})]
    if len(ways) == 1:
        return ()
    found = " and ".join(ways) or "none"
    return ((ways[-1] if ways else "energy", f"need one of {', '.join(given)}, got {found}"),)


def missing_faults(key: str, values: Mapping[str, float], axes: Sequence[str]) -> Faults:
    """Return a fault for each axis that a mapping leaves out."""
    return tuple(
        (f"{key}.{name}", f"need a value along {name}, got none")
        for name in axes
        if name not in values
    )
