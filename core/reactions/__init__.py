"""Equations, their balance, and the stoichiometric matrix."""
