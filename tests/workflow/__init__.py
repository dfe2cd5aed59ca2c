"""The workflow as a whole, run by Snakemake as a user runs it."""
