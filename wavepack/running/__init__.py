"""A run as it happens: what is written, when, and how it goes on after a stop."""
