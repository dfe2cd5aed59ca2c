"""Tests of models, of their documents and of what describes them."""
