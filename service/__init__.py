"""The web service: routes, problem details, operation, command line."""
