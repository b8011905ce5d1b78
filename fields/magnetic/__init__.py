"""Magnetic field models, one file each, and what they share."""
