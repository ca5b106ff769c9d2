"""The run folder: what is written into it, and how it is read back."""
