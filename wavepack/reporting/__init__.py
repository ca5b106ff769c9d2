"""Results as tables and pages; computes nothing."""
