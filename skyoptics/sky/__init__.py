"""Radiance of layers and curtains of particles over a background."""
