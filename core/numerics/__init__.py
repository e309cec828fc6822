"""Quadrature and root bracketing, shared by the chapters."""
