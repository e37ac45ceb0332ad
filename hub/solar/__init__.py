"""Readings and a position to harvest figures. Pure computation on arrays."""
