"""Resistance laws, their fits and uncertainty."""
