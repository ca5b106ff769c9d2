"""The particle and the constants of nature in the units of the run."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Particle:
    r"""What moves, and the constants its equation needs, in run units.

    Attributes
    ----------
    mass : float
        Mass [mass].
    charge : float
        Charge in units of e.
    hbar : float
        :math:`\hbar` [energy time].
    hbar2_per_mass : float
        :math:`\hbar^2` over the unit of mass [energy length**2].
    coulomb : float
        :math:`e^2/4\pi\epsilon_0` [energy length].
    """

    mass: float
    charge: float
    hbar: float
    hbar2_per_mass: float
    coulomb: float

    @property
    def stiffness(self) -> float:
        r""":math:`\hbar^2/2m` [energy length**2]: kinetic energy over k squared."""
        return self.hbar2_per_mass / (2 * self.mass)

    def stiffness_of(self, mass: float) -> float:
        r""":math:`\hbar^2/2m` of another mass [mass], for layered structures."""
        return self.hbar2_per_mass / (2 * mass)
