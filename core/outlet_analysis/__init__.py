"""The account that fits the plant's readings best, and its uncertainty."""
