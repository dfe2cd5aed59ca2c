# What the rules share: functions that answer for a wildcard, by naming files.
import csv
import math
import re
import shlex
import sys
from pathlib import Path

from hmmseg.evidence.amount import null_bases_of

# Rules call the hmmseg that was installed beside this Snakemake, environment activated or not.
shell.prefix(f"PATH={shlex.quote(str(Path(sys.executable).parent))}:$PATH; ")

# Null sequence is drawn in so many ways.
NULLS = 3
# A job draws and calls as much of it as so many batches hold: without tracks to write, it takes
# a quarter of the time that decoding takes.
BATCHES_OF_NULLS = 4
# In so many turns a comparison holds sequence out, each a job of its own where there is much.
FOLDS = 5


wildcard_constraints:
    assembly=r"[A-Za-z0-9][A-Za-z0-9._-]*",
    batch=r"[0-9a-f]{32}",
    part=r"[1-9][0-9]*",
    fold=r"[1-9][0-9]*",
    states=r"[1-8]",
    order=r"[0-8]",


def one_of(names):
    """Pattern that matches these names and no others."""
    return "|".join(map(re.escape, names)) or "(?!)"


def look_only_when_a_job_ends(workflow):
    """Keep the scheduler from looking through all jobs many times a second.

    Snakemake limits how many jobs it starts in a second, and for that looks again one second after
    each look while jobs are ready: each job that ends begins another such series, so that with
    hundreds of ready jobs it is soon busy with nothing else. Jobs here are few enough to start
    without a limit; a limit that was asked for stays.
    """
    limit = workflow.scheduling_settings.max_jobs_per_timespan
    if (limit.max_jobs, limit.timespan) == (100, 1):  # as it is by default
        workflow.scheduler.job_rate_limiter = None


def files(wildcards, column):
    """File in one column of an assembly's row; none if the cell is blank."""
    path = SETTINGS[wildcards.assembly].get(column)
    return [] if path is None else path


def fasta_of(wildcards):
    """The assembly itself."""
    return files(wildcards, "fasta")


def records_of(wildcards):
    """List of the records to use."""
    return files(wildcards, "records")


def exclude_of(wildcards):
    """Intervals to leave out."""
    return files(wildcards, "exclude")


def start_of(wildcards):
    """Model or specification to start training from."""
    return files(wildcards, "init") or files(wildcards, "spec")


def train_labels_of(wildcards):
    """Known regions to train on."""
    return files(wildcards, "train_labels")


def frozen_of(wildcards):
    """Model to use as it is."""
    return files(wildcards, "model")


def model_of(wildcards):
    """The assembly's model, trained or given."""
    return f"{RESULTS}/{wildcards.assembly}/model.json"


def labels_of(wildcards):
    """Known regions."""
    return files(wildcards, "labels")


def grid_of(wildcards):
    """A folder for each model of the grid."""
    return expand(
        f"{RESULTS}/{wildcards.assembly}/grid/{{states}}-{{order}}",
        states=config["select_states"],
        order=config["select_orders"],
    )


def selections():
    """Folder of each assembly's selection; none if no grid is given."""
    if not config["select_states"] or not config["select_orders"]:
        return []
    return [f"{RESULTS}/{assembly}/selection" for assembly in ASSEMBLIES]


def parts_of_nulls(wildcards):
    """How many jobs draw null sequence."""
    settings = SETTINGS[wildcards.assembly]
    bases = settings["null_bases"] or null_bases_of(most_bases(settings["fasta"]))
    return math.ceil(NULLS * bases / (BATCHES_OF_NULLS * config["batch_bases"]))


def nulls_of(wildcards):
    """Null sequence for other jobs to draw; none if one job does everything."""
    large = wildcards.assembly in LARGE
    return f"{RESULTS}/{wildcards.assembly}/nulls" if large else []


def replicates_of(wildcards):
    """Folders of the parts of null sequence, each named by its number."""
    if wildcards.assembly not in LARGE:
        return []
    return [
        f"{RESULTS}/{wildcards.assembly}/replicates/{part + 1}"
        for part in range(parts_of_nulls(wildcards))
    ]


def folds_of(wildcards):
    """Folders of the folds of a comparison, each named by its number."""
    if wildcards.assembly not in LARGE:
        return []
    return [f"{RESULTS}/{wildcards.assembly}/folds/{fold + 1}" for fold in range(FOLDS)]


def batches_of(assembly):
    """Rows of an assembly's table of batches, known once they are made."""
    folder = checkpoints.batches.get(assembly=assembly).output.folder
    with (Path(folder) / "batches.tsv").open(newline="") as handle:
        return list(csv.DictReader(handle, delimiter="\t"))


def decoded_batches(wildcards):
    """A mark for each batch of an assembly whose result is not there already."""
    return [
        f"{RESULTS}/{wildcards.assembly}/decoded/{row['batch']}"
        for row in batches_of(wildcards.assembly)
        if row["reused"] == "no"
    ]


def reused_batches():
    """How many batches of the assemblies that were cut in this run were there already."""
    tables = [Path(RESULTS, name, "batches", "batches.tsv") for name in LARGE]
    rows = []
    for table in tables:
        if table.is_file() and table.stat().st_mtime >= BEGUN:
            rows += table.read_text().splitlines()[1:]
    if not rows:
        return (
            "No assembly was cut into batches: none was large enough, or none was new."
        )
    reused = sum(row.endswith("\tyes") for row in rows)
    return f"{reused} of {len(rows)} batches were decoded before and used again."


def labelled_calls(wildcards):
    """NAME=FOLDER for each assembly."""
    return shlex.join(f"{name}={RESULTS}/{name}/calls" for name in ASSEMBLIES)


def stages_of(wildcards):
    """What the page of an assembly shows: all stages that it asks for."""
    folder = f"{RESULTS}/{wildcards.assembly}"
    stages = {"survey": "survey", "model": "model.json", "calls": "calls"}
    if wildcards.assembly in CALIBRATED:
        stages["calibration"] = "calibration"
    if wildcards.assembly in COMPARED:
        stages["comparison"] = "comparison"
    if selections():
        stages["selection"] = "selection"
    return {stage: f"{folder}/{name}" for stage, name in stages.items()}


def pages():
    """A page for each assembly, and one that compares them if there are several."""
    found = expand(f"{RESULTS}/{{assembly}}/report.html", assembly=ASSEMBLIES)
    return [*found, f"{RESULTS}/report.html"] if len(ASSEMBLIES) > 1 else found
