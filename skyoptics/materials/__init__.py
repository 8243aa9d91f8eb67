"""Refractive index and absorption of water, ice, air and tabulated liquids."""
