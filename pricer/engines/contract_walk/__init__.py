"""Contracts walked path by path: no legs, no smoothing, only what the contract says on simulated prices."""
