# What a job asks a cluster for: the least that config/config.yaml states, more with the size of
# its sequence, and twice as much each time that it is done again.

# Megabytes and minutes for each megabase. Twice what was measured or more, see DEVELOPERS.md;
# python -m tests.benchmarks.commands measures it again.
MORE = {
    "survey": (8, 0.1),
    "train": (8, 2),
    "select": (8, 10),
    "compare": (8, 10),
    "batches": (8, 0.1),
    "cut": (8, 0.1),
    "decode": (10, 0.5),
    "decode_batch": (10, 0.5),
    "gather": (2, 0.1),
    "report": (4, 0.2),
}


def megabases(name, wildcards):
    """Size of the sequence that a job reads: a batch, or an assembly."""
    if name == "decode_batch":
        rows = batches_of(wildcards.assembly)
        [bases] = [row["bases"] for row in rows if row["batch"] == wildcards.batch]
        return int(bases) / 1e6
    return most_bases(SETTINGS[wildcards.assembly]["fasta"]) / 1e6


def needed(name, least, which, wildcards, attempt):
    """Size of one need of a job: the least and what its sequence adds, doubled by attempt."""
    more = MORE[name][which] * megabases(name, wildcards) if name in MORE else 0
    return math.ceil(least + more) * 2 ** (attempt - 1)


def memory_of(name):
    """Function that answers with the megabytes of a job of a rule."""

    def megabytes(wildcards, attempt):
        return needed(name, config["mem_mb"], 0, wildcards, attempt)

    return megabytes


def minutes_of(name):
    """Function that answers with the minutes after which a job of a rule is ended."""

    def minutes(wildcards, attempt):
        return needed(name, config["runtime"], 1, wildcards, attempt)

    return minutes
