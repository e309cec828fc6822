"""The stoichiometric table, and how far the extents can go."""
