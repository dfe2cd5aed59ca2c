"""Sequence in: letters, files, records, gaps and contigs, and the survey of an assembly.

Coordinates are 0-based and half-open. Import from the modules; this room re-exports nothing,
so that a command pays only for what it uses.
"""

__all__: list[str] = []
