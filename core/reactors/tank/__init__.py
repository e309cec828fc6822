"""Stirred tanks: where they rest, one or several, and how big they must be."""
