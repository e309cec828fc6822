"""One reaction along its own way: what quadrature and closed balances find exactly."""
