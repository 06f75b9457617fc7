"""Paths: low-discrepancy normals and fused sampling kernels. Knows no trades by name."""
