"""Tests of hmmseg."""
