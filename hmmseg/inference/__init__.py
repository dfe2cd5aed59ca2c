"""Likelihood, posteriors and best paths over whole records: blocks, strands, circles."""
