"""How a state is stepped through time: schemes, steppers, schedule, march."""
