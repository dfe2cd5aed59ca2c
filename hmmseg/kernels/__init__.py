"""Compiled inner loops: arrays in, arrays filled; no files, no text, no objects."""
