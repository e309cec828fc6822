"""Rate laws and their constants."""
