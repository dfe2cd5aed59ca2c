"""Statistical checks that take minutes: ``pytest tests/slow --slow``."""
