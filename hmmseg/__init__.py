"""Segmentation of genome assemblies by hidden Markov models and Markov chains."""

__all__ = ["__version__"]

__version__ = "0.1.0"
