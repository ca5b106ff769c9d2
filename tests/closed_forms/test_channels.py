"""A ridge across a harmonic wire: transmission of each transverse mode."""

import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import at_table, propagate
from tests.closed_forms.reference_values import rows

WIRE = """
title = "constriction"
[particle]
mass = 0.067
[grid]
x = { from = -420.0, to = 400.0, points = 320, ends = "absorbing" }
y = { from = -45.0, to = 45.0, points = 31, ends = "walls" }
[[potential]]
shape = "sech2"
height = 0.020
at = 0.0
width = 20.0
[[potential]]
shape = "harmonic"
quantum = { y = 0.010 }
[[packet]]
shape = "channel"
center = { x = -130.0 }
sigma = { x = 13.0 }
mode = 0
energy = 0.022
[absorber]
width = { x = 240.0 }
[propagator]
order = 4
step = 3.0
[time]
end = 3000.0
[[detector]]
name = "exit"
x = 130.0
energies = { from = 0.015, to = 0.045, points = 31 }
[output]
frames = 2
"""


@pytest.mark.parametrize("mode", [0, 1])
def test_transmission_of_a_mode(mode: int) -> None:
    """T_n(E) = T_0(E - hbar omega_y n): the modes do not mix."""
    outcome = propagate(WIRE, f"packet.mode={mode}")
    table = [row for row in rows("P7", "channel_sech2") if row.parameters["mode"] == mode]
    found, wanted = at_table(outcome, table, least=1e-2)
    assert len(found) == 4
    agree("P7 T_n(E)", found, wanted)
