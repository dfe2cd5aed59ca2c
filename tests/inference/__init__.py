"""Tests of inference against independent computations."""
