"""Formulas and molar masses."""
