"""Closed forms, bounds and quadratures: one file per family."""
