"""Regions and posteriors as the files that genome browsers and annotation tools read."""

from hmmseg.tracks.bed import invalid_bed_names, read_bed, write_regions_bed
from hmmseg.tracks.bigwig import PosteriorTrack, rounded_runs
from hmmseg.tracks.gff3 import write_regions_gff3
from hmmseg.tracks.sizes import read_chrom_sizes, write_chrom_sizes
from hmmseg.tracks.table import read_regions_table, write_regions_table

__all__ = [
    "PosteriorTrack",
    "invalid_bed_names",
    "read_bed",
    "read_chrom_sizes",
    "read_regions_table",
    "rounded_runs",
    "write_chrom_sizes",
    "write_regions_bed",
    "write_regions_gff3",
    "write_regions_table",
]
