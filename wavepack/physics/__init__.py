"""What moves, and in what: units, particle, potentials, packets, absorbers, H."""
