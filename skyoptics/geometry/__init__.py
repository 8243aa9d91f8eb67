"""Axes, angles and grids of directions."""
