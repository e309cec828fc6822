"""What flows in and out, known or as metered."""
