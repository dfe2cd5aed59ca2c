"""Tests of hmmseg.jobs."""
