"""A small valid scenario on one axis and one on two."""

LINE = """\
title = "One barrier"

[particle]
mass = 0.067

[grid]
x = { from = -150.0, to = 150.0, points = 2048 }

[[potential]]
name = "barrier"
shape = "slab"
height = 0.3
x = { from = 0.0, to = 3.37 }

[[packet]]
shape = "gaussian"
center = -60.0
sigma = 8.0
energy = 0.15

[absorber]
width = 40.0

[propagator]
step = 0.02

[time]
end = 1200.0

[[region]]
name = "drain"
role = "transmitted"
x = { above = 20.0 }

[[detector]]
name = "exit"
x = 30.0
"""

PLANE = LINE.replace(
    "points = 2048 }",
    'points = 256 }\ny = { from = -20.0, to = 20.0, points = 64, ends = "periodic" }',
).replace("center = -60.0", "center = { x = -60.0, y = 0.0 }")
