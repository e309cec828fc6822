"""The composition at which reactions come to rest."""
