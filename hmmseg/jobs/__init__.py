"""One module for each command: read the inputs, call the rooms, write the outputs."""

__all__: list[str] = []
