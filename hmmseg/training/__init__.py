"""Fitting models to sequence."""
