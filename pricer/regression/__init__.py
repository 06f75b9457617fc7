"""Regression for backward recursions: bases, least squares on held-out samples. Knows no finance."""
