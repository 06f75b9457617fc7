"""Compiled kernels: arrays in, arrays out; no Python objects, no global state, no interpreter lock.

Importing :mod:`pricer.simulation.kernels.fused` compiles them, or loads them from the disk cache.
"""
