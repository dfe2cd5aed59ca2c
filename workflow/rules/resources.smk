# What a job asks a cluster for: the least that config/config.yaml states, more with the size of
# its sequence, and twice as much each time that it is done again.

# Megabytes for each megabase that a job reads, and minutes for each that it works on. About
# twice what was measured or more; python -m tests.benchmarks.commands measures most of it again.
MORE = {
    "survey": (6, 0.1),
    "train": (5, 2),
    "select": (5, 10),
    "fold": (13, 4),
    "compare": (16, 10),
    "calibrate": (10, 6),
    "nulls": (10, 0.1),
    "replicate": (2, 3),
    "batches": (6, 0.1),
    "cut": (6, 0.1),
    "decode": (10, 0.5),
    "decode_batch": (10, 0.5),
    "gather": (2, 0.1),
    "report": (4, 0.2),
}
READING = 0.1  # minutes for each megabase, whatever is done with it
SELECTED = 10  # megabases of which hmmseg select takes its sample


def megabases(name, wildcards):
    """Size of the sequence that a job reads: a batch, an assembly, or nothing to speak of."""
    if name not in MORE:
        return 0
    if name == "replicate":
        return BATCHES_OF_NULLS * config["batch_bases"] / 1e6
    if name == "decode_batch":
        rows = batches_of(wildcards.assembly)
        [bases] = [row["bases"] for row in rows if row["batch"] == wildcards.batch]
        return int(bases) / 1e6
    return most_bases(SETTINGS[wildcards.assembly]["fasta"]) / 1e6


def sample(name, wildcards, read):
    """How much of what it reads a job works on."""
    if name == "train" and SETTINGS[wildcards.assembly]["train_bases"]:
        return min(read, SETTINGS[wildcards.assembly]["train_bases"] / 1e6)
    return min(read, SELECTED) if name == "select" else read


def memory_of(name):
    """Function that answers with the megabytes of a job of a rule."""
    more, _ = MORE.get(name, (0, 0))

    def megabytes(wildcards, attempt):
        size = megabases(name, wildcards)
        return math.ceil(config["mem_mb"] + more * size) * 2 ** (attempt - 1)

    return megabytes


def minutes_of(name):
    """Function that answers with the minutes after which a job of a rule is ended."""
    _, more = MORE.get(name, (0, 0))

    def minutes(wildcards, attempt):
        read = megabases(name, wildcards)
        longer = READING * read + more * sample(name, wildcards, read)
        return math.ceil(config["runtime"] + longer) * 2 ** (attempt - 1)

    return minutes
