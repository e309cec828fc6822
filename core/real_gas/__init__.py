"""Gases that are not ideal: cubic equations of state."""
