"""Quadrature, root bracketing and the marching of equations, shared by the chapters."""
