"""Lens projections, aim and frame."""
