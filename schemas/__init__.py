"""Wire names, units and shapes: JSON to core types and back."""
