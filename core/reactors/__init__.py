"""How big a reactor must be, what comes out of it, and where it must be run."""
