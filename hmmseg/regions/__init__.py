"""From paths and posteriors to regions: found, filtered and scored."""

__all__: list[str] = []
