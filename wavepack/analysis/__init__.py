"""The results of a run as plain values."""
