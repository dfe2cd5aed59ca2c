"""Tests of hmmseg.tracks."""
