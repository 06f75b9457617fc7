"""Early exercise: an interval for options that may be ended on any of several dates."""
