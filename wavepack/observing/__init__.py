"""What is seen of a state: moments, regions, currents."""
