"""How good calls are, and whether a hidden state is worth its price."""

__all__: list[str] = []
