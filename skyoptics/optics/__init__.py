"""Interfaces, polarisation, bow and halo angles, spectral bins and scattering tables."""
