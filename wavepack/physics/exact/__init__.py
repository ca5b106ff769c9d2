r"""Closed forms and exact stationary solutions: what a run can be held against.

Each takes plain numbers in any one consistent set of units, with ``c`` for
:math:`\hbar^2/2m` [energy length**2] and, where time enters, ``hbar``
[energy time]. Sources by key in docs/references.md.
"""

from wavepack.physics.exact.averages import momentum_density, packet_average
from wavepack.physics.exact.barriers import (
    parabolic_barrier,
    rectangular_barrier,
    saddle_transmission,
    sech2_barrier,
    sharp_step,
    smooth_step_reflection,
)
from wavepack.physics.exact.driven import (
    Sidebands,
    fast_limit,
    half_space_limit,
    oscillating_half_space,
    oscillating_region,
)
from wavepack.physics.exact.free import (
    free_covariance,
    free_mean,
    free_packet,
    free_width,
    fringe_period,
    rotated_covariance,
    speed,
    two_slits_density,
    wavenumber,
)
from wavepack.physics.exact.layers import (
    Layer,
    Lead,
    Stack,
    incoming_amplitude,
    stack_reflection,
    stack_transmission,
    triangular_barrier,
    uniform_stack,
)
from wavepack.physics.exact.oscillator import (
    coherent_autocorrelation,
    forced_mean,
    ground_width,
    oscillator_mean,
    oscillator_packet,
    oscillator_wavenumber,
    oscillator_width,
)
from wavepack.physics.exact.resonances import Peak, Pole, resonance_peak, resonance_pole
from wavepack.physics.exact.wells import (
    box_levels,
    finite_well_levels,
    harmonic_levels,
    morse_levels,
    sech2_well_levels,
    softcore_ground_state,
    triangular_well_levels,
)

__all__ = [
    "Layer",
    "Lead",
    "Peak",
    "Pole",
    "Sidebands",
    "Stack",
    "box_levels",
    "coherent_autocorrelation",
    "fast_limit",
    "finite_well_levels",
    "forced_mean",
    "free_covariance",
    "free_mean",
    "free_packet",
    "free_width",
    "fringe_period",
    "ground_width",
    "half_space_limit",
    "harmonic_levels",
    "incoming_amplitude",
    "momentum_density",
    "morse_levels",
    "oscillating_half_space",
    "oscillating_region",
    "oscillator_mean",
    "oscillator_packet",
    "oscillator_wavenumber",
    "oscillator_width",
    "packet_average",
    "parabolic_barrier",
    "rectangular_barrier",
    "resonance_peak",
    "resonance_pole",
    "rotated_covariance",
    "saddle_transmission",
    "sech2_barrier",
    "sech2_well_levels",
    "sharp_step",
    "smooth_step_reflection",
    "softcore_ground_state",
    "speed",
    "stack_reflection",
    "stack_transmission",
    "triangular_barrier",
    "triangular_well_levels",
    "two_slits_density",
    "uniform_stack",
    "wavenumber",
]
