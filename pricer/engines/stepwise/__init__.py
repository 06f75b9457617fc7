"""Legs on paths in steps: local volatility, and lognormal levels above known amounts or with weights of two signs."""
