"""What size a conversion needs."""
