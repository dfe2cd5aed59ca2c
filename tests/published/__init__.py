"""Worked examples from the literature."""
