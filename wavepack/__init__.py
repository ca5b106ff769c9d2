"""Time-dependent wavepacket propagation from one TOML file."""

__version__ = "0.1.0"
