"""Drives: oscillation, formula, envelope, period, bound."""

import math

import pytest

from wavepack.errors import NumericalFault
from wavepack.physics.drives import Drive, Envelope
from wavepack.physics.expressions import compile_expression

HBAR = 0.6582119569509067


def test_oscillation_has_the_photon_frequency() -> None:
    """The factor is offset + cos(2 pi photon_energy t/h + phase)."""
    drive = Drive(photon_energy=0.05, phase=0.3, offset=2.0).bound(HBAR)
    frequency = 0.05 / (2 * math.pi * HBAR)
    for t in (0.0, 7.0, 123.4):
        assert drive.factor(t) == pytest.approx(2 + math.cos(2 * math.pi * frequency * t + 0.3))


def test_period_repeats_the_factor() -> None:
    """After h/photon_energy the factor is the same."""
    drive = Drive(photon_energy=0.05).bound(HBAR)
    period = drive.period(HBAR)
    assert period is not None
    assert period == pytest.approx(4.135667696923859 / 0.05)
    assert drive.factor(3.0 + period) == pytest.approx(drive.factor(3.0))


def test_envelope_rises_and_falls_as_sine_squared() -> None:
    """The envelope is 0, 1/2, 1, 1, 1/2, 0 at the places that rise, from and to name."""
    envelope = Envelope(rise=10.0, start=5.0, stop=45.0)
    values = [envelope.factor(t) for t in (4.0, 5.0, 10.0, 15.0, 30.0, 40.0, 45.0, 99.0)]
    assert values == pytest.approx([0, 0, 0.5, 1, 1, 0.5, 0, 0], abs=1e-15)
    assert envelope.factor(7.5) == pytest.approx(math.sin(math.pi / 8) ** 2)


def test_envelope_without_end_stays() -> None:
    """Without `to` there is no fall, and with one the drive has no period."""
    assert Envelope(rise=1.0).factor(1e9) == 1.0
    assert Drive(photon_energy=0.1, envelope=Envelope(rise=1.0)).period(HBAR) is None


def test_formula_drives() -> None:
    """A formula in t gives the factor, and its largest sample the bound."""
    drive = Drive(
        formula=compile_expression("2*exp(-t)", variables=("t",)),
        envelope=Envelope(rise=1.0, stop=4.0),
    )
    assert drive.factor(2.0) == pytest.approx(2 * math.exp(-2))
    assert drive.largest() == pytest.approx(2.0)
    assert drive.period(HBAR) is None


def test_largest_bounds_an_oscillation() -> None:
    """No factor exceeds |offset| + 1."""
    assert Drive(photon_energy=0.1, offset=-0.5).largest() == 1.5


def test_largest_of_a_formula_within_its_time() -> None:
    """A late pulse is seen, what lies beyond the time asked for is not, nor what is no number."""
    pulse = Drive(formula=compile_expression("3*exp(-((t - 900)/5)**2) + 1/(t - 500)", ("t",)))
    assert pulse.largest(until=1000.0) > 3.0
    growing = compile_expression("t", ("t",))
    assert Drive(formula=growing).largest(until=50.0) == 50.0
    early = Drive(formula=growing, envelope=Envelope(rise=1.0, stop=7.0))
    assert early.largest(until=50.0) == 7.0
    late = Drive(formula=growing, envelope=Envelope(rise=1.0, start=60.0))
    assert late.largest(until=50.0) == 0.0


def test_formula_not_finite_is_refused() -> None:
    """A factor that is not finite names the drive and the time."""
    drive = Drive(formula=compile_expression("1/(t - 1)", variables=("t",)))
    with pytest.raises(NumericalFault, match=r"finite factor.*t = 1"):
        drive.factor(1.0)


def test_unbound_oscillation_is_refused() -> None:
    """Without hbar the frequency is unknown, which is said."""
    with pytest.raises(ValueError, match="hbar"):
        Drive(photon_energy=0.1).factor(1.0)


@pytest.mark.parametrize(
    ("drive", "key"),
    [
        (Drive(), "photon_energy"),
        (Drive(photon_energy=1.0, formula=compile_expression("t", ("t",))), "photon_energy"),
        (Drive(formula=compile_expression("x", ("x", "t"))), "formula"),
        (Drive(formula=compile_expression("t", ("t",)), offset=1.0), "offset"),
        (Drive(photon_energy=1.0, envelope=Envelope(rise=3.0, stop=5.0)), "envelope.to"),
    ],
)
def test_contradictions_are_named(drive: Drive, key: str) -> None:
    """Each contradiction between the fields of a drive names its key."""
    assert [found for found, _ in drive.faults()] == [key]
    assert Drive(photon_energy=1.0).faults() == ()
