"""Tests of training against independent computations."""
