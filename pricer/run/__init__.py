"""Runs: plan the work, do it, hand back frozen results."""
