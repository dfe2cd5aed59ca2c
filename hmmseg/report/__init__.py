"""Results as figures and pages for people to look at."""

__all__: list[str] = []
