"""The web service: routes, problem details, operation, command line."""

__version__ = "0.1.0"
