# What the rules share: settings, checked and merged, and functions that answer for a wildcard.
import csv
import math
import re
import shlex
import sys
import time
from functools import cache
from pathlib import Path

from hmmseg.evidence.amount import null_bases_of
from snakemake.exceptions import WorkflowError
from snakemake.utils import validate

# Rules call the hmmseg that was installed beside this Snakemake, environment activated or not.
shell.prefix(f"PATH={shlex.quote(str(Path(sys.executable).parent))}:$PATH; ")

# Columns of the sample sheet that name a file.
FILES = (
    "fasta",
    "records",
    "exclude",
    "init",
    "spec",
    "model",
    "labels",
    "train_labels",
)
# Columns whose cells are words even if they look like numbers.
WORDS = ("assembly", "circular", "fix", *FILES)
# Ways to say where training starts, and the settings that each of them brings along.
STARTS = ("preset", "spec", "init")
BROUGHT_ALONG = ("states", "order", "strands", "start")
# Settings of training, which a given model does without.
OF_TRAINING = (
    *STARTS,
    *BROUGHT_ALONG,
    "restarts",
    "max_iterations",
    "tolerance",
    "pseudocount",
    "train_bases",
    "train_labels",
    "fix",
)
# A byte of compressed sequence holds about four letters, and hardly ever more than so many.
LETTERS_IN_A_BYTE = 5
# Null sequence is drawn in so many ways.
NULLS = 3
# A job draws and calls as much of it as so many batches hold: without tracks to write, it takes
# a quarter of the time that decoding takes.
BATCHES_OF_NULLS = 4
# In so many turns a comparison holds sequence out, each a job of its own where there is much.
FOLDS = 5


def culprit(problem):
    """Dotted key at fault in a jsonschema ValidationError: 'defaults.states'."""
    keys = [str(key) for key in problem.absolute_path]
    given = problem.instance
    if problem.validator == "required":
        keys.append(next(key for key in problem.validator_value if key not in given))
    if problem.validator == "additionalProperties":
        keys.append(
            next(key for key in given if key not in problem.schema["properties"])
        )
    return ".".join(keys)


def explain(problem):
    """What is wrong, in the words of one who edits the file."""
    if problem.validator == "required":
        return "has no value"
    if problem.validator == "additionalProperties":
        return "is not known; config/README.md lists all there are"
    return f"{problem.message} ({problem.schema['description']})"


def check_config():
    """Check the configuration and fill in the defaults that the schema states."""
    try:
        validate(config, "../schemas/config.schema.yaml")
    except WorkflowError as error:
        problem = error.__context__
        raise config_error(culprit(problem), explain(problem)) from None
    for key in ("init", "spec", "model"):
        path = config["defaults"][key]
        if path is not None and not Path(path).is_file():
            raise config_error(f"defaults.{key}", f"there is no file {path}")


def config_error(key, message):
    """Error about one key of the configuration."""
    return WorkflowError(f"configuration, key {key}: {message}")


def sheet_error(row, column, message):
    """Error about one cell; rows count as in a spreadsheet, the header being row 1."""
    return WorkflowError(
        f"{config['assemblies']}, row {row}, column {column}: {message}"
    )


def cell_value(column, text):
    """Number if the cell holds one and the column may, else the text itself."""
    try:
        number = float(text)
    except ValueError:
        return text
    if column in WORDS or not math.isfinite(number):
        return text
    return int(number) if number.is_integer() else number


def sheet_rows():
    """Row number and filled cells of each row; blank rows and those behind # aside."""
    path = Path(config["assemblies"])
    if not path.is_file():
        raise config_error("assemblies", f"there is no file {path}")
    header = None
    # A byte that is no text stays in its cell, so that the cell can be named.
    reading = {"encoding": "utf-8-sig", "errors": "surrogateescape"}
    with path.open(newline="", **reading) as handle:
        lines = csv.reader(handle, delimiter="\t", quoting=csv.QUOTE_NONE)
        for row, cells in enumerate(lines, start=1):
            cells = [cell.strip() for cell in cells]
            if not any(cells) or cells[0].startswith("#"):
                continue
            for column, cell in enumerate(cells, start=1):
                if not cell.isprintable():
                    raise sheet_error(
                        row, column, "is no text; save the sheet as UTF-8"
                    )
            if header is None:
                header = check_header(cells, row)
                continue
            if len(cells) > len(header):
                raise sheet_error(
                    row, len(header) + 1, "lies beyond the last named column"
                )
            named = zip(header, cells)
            yield row, {name: cell_value(name, cell) for name, cell in named if cell}


def check_header(cells, row):
    """Names of the columns: all known, each there once, none missing that is required."""
    for position, column in enumerate(cells, start=1):
        if not column:
            raise sheet_error(row, position, "has no name")
        if column in cells[: position - 1]:
            raise sheet_error(row, column, "stands there twice")
        if column not in COLUMNS:
            raise sheet_error(row, column, "is not known; config/README.md lists all")
    for column in ("assembly", "fasta"):
        if column not in cells:
            raise sheet_error(row, column, "is missing")
    return cells


def check_cells(rows):
    """Check the cells of all rows against the schema."""
    try:
        validate({"rows": list(rows.values())}, "../schemas/assemblies.schema.yaml")
    except WorkflowError as error:
        problem = error.__context__
        _, position, column = culprit(problem).split(".")
        raise sheet_error(list(rows)[int(position)], column, explain(problem)) from None


def check_row(row, cells):
    """Check that the files of a row are there and its settings do not contradict each other."""
    for column in FILES:
        if column in cells and not Path(cells[column]).is_file():
            raise sheet_error(row, column, f"there is no file {cells[column]}")
    settings = merged(cells)
    if "labels" in cells and settings["compare"] == "skip":
        raise sheet_error(row, "labels", "only compare reads them; set compare to run")
    if settings["model"] is not None:
        check_frozen(row, cells, settings["model"])
        return
    starts = [key for key in STARTS if settings[key] is not None]
    if len(starts) > 1:
        raise sheet_error(
            row, starts[1], f"does not go with {starts[0]}; give one of the two"
        )
    for column in BROUGHT_ALONG:
        if column in cells and starts:
            raise sheet_error(
                row, column, f"comes with the {starts[0]}; leave it blank"
            )
    if (
        not starts
        and settings["start"] == "free"
        and settings["strands"] == "symmetric"
    ):
        raise sheet_error(row, "start", "free needs strands: stranded")


def check_frozen(row, cells, model):
    """Check that a given model is one, and that the row does not say how to train another."""
    for column in OF_TRAINING:
        if column in cells:
            raise sheet_error(
                row, column, "is for training; a given model is not trained"
            )
    # Jobs on other machines read the sheet again, but the model was checked by then.
    if workflow.is_main_process and (problem := problem_of_model(model)):
        raise sheet_error(row, "model", problem)


@cache
def problem_of_model(path):
    """What is wrong with a model document, in a line; None if nothing is."""
    from hmmseg.errors import HmmsegError
    from hmmseg.model import load_model

    try:
        load_model(path)
    except HmmsegError as error:
        return str(error)
    return None


def merged(cells):
    """Defaults of the configuration with the cells of a row over them."""
    # A row that says where the model comes from replaces a default that says otherwise.
    origins = (*STARTS, "model")
    replaced = origins if any(key in cells for key in origins) else ()
    defaults = {
        key: None if key in replaced else value
        for key, value in config["defaults"].items()
    }
    return {**defaults, **cells}


def read_sheet():
    """Settings of each assembly: the defaults, with its row's cells over them."""
    rows = dict(sheet_rows())
    check_cells(rows)
    settings = {}
    for row, cells in rows.items():
        check_row(row, cells)
        if cells["assembly"] in settings:
            raise sheet_error(row, "assembly", "stands in a row above already")
        settings[cells["assembly"]] = merged(cells)
    if not settings:
        raise WorkflowError(
            f"{config['assemblies']} lists no assembly; add a row for each"
        )
    return settings


def most_bases(fasta):
    """Bases in an assembly, at the most, as the size of its file tells without reading it."""
    letters = LETTERS_IN_A_BYTE if fasta.endswith((".gz", ".bgz")) else 1
    return Path(fasta).stat().st_size * letters


def is_small(fasta):
    """Whether all of an assembly fits into one batch, as far as the size of its file tells."""
    return most_bases(fasta) <= config["batch_bases"]


def one_of(names):
    """Pattern that matches these names and no others."""
    return "|".join(map(re.escape, names)) or "(?!)"


def look_only_when_a_job_ends(workflow):
    """Keep the scheduler from looking through all jobs many times a second.

    Snakemake limits how many jobs it starts in a second, and for that looks again one second after
    each look while jobs are ready: each job that ends begins another such series, so that with
    hundreds of ready jobs it is soon busy with nothing else. Jobs here are few enough to start
    without a limit; on a cluster `jobs` of the profile limits them.
    """
    workflow.scheduler.job_rate_limiter = None


BEGUN = time.time()
check_config()
COLUMNS = ("assembly", *FILES, "fix", "circular", *config["defaults"])
SETTINGS = read_sheet()
ASSEMBLIES = list(SETTINGS)
RESULTS = config["output"].rstrip("/")
# Where results of batches are kept; assemblies and revisions of them share it.
PARTS = (config["reuse"] or f"{RESULTS}/parts").rstrip("/")
CALIBRATED = [name for name in ASSEMBLIES if SETTINGS[name]["calibrate"] == "run"]
COMPARED = [name for name in ASSEMBLIES if SETTINGS[name]["compare"] == "run"]
FROZEN = [name for name in ASSEMBLIES if SETTINGS[name]["model"] is not None]
TRAINED = [name for name in ASSEMBLIES if SETTINGS[name]["model"] is None]
SMALL = [name for name in ASSEMBLIES if is_small(SETTINGS[name]["fasta"])]
LARGE = sorted(set(ASSEMBLIES) - set(SMALL))


wildcard_constraints:
    assembly=r"[A-Za-z0-9][A-Za-z0-9._-]*",
    batch=r"[0-9a-f]{32}",
    part=r"[1-9][0-9]*",
    fold=r"[1-9][0-9]*",
    states=r"[1-8]",
    order=r"[0-8]",


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


def options(wildcards, *keys):
    """Options of the command line for those of the settings that have a value."""
    settings = SETTINGS[wildcards.assembly]
    words = []
    for key in keys:
        if settings.get(key) is not None:
            words += [f"--{key.replace('_', '-')}", str(settings[key])]
    return shlex.join(words)


def listed(wildcards, column, option):
    """An option for each of the names, separated by commas, in one column of a row."""
    names = SETTINGS[wildcards.assembly].get(column, "").split(",")
    return shlex.join(f"{option}={name.strip()}" for name in names if name.strip())


def circles(wildcards):
    """Options that name the circular records of an assembly."""
    return listed(wildcards, "circular", "--circular")


def survey_options(wildcards):
    """Which records a survey counts."""
    chosen = options(wildcards, "records", "min_record", "exclude", "gap_min")
    return f"{chosen} {circles(wildcards)}".rstrip()


def select_options(wildcards):
    """Which records to select a model on, and how."""
    strands = SETTINGS[wildcards.assembly]["strands"]
    chosen = f"{options(wildcards, 'seed', 'soft_mask')} {survey_options(wildcards)}"
    return f"--{strands} {chosen}".rstrip()


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


def train_options(wildcards):
    """Which records to train on, from where, and how long."""
    settings = SETTINGS[wildcards.assembly]
    if all(settings[key] is None for key in STARTS):
        keys = ("states", "order", "start")
        model = f"{options(wildcards, *keys)} --{settings['strands']}"
    else:
        model = options(wildcards, *STARTS)
    keys = (
        "restarts",
        "seed",
        "max_iterations",
        "tolerance",
        "pseudocount",
        "train_bases",
        "soft_mask",
    )
    known = settings.get("train_labels")
    labels = "" if known is None else f" {shlex.join(['--labels', known])}"
    fixed = listed(wildcards, "fix", "--fix")
    words = f"{model} {options(wildcards, *keys)}{labels} {fixed} {survey_options(wildcards)}"
    return " ".join(words.split(" "))


def batch_options(wildcards):
    """How to call regions, in records that have been chosen."""
    keys = (
        "gap_min",
        "soft_mask",
        "decoder",
        "threshold",
        "min_length",
        "merge_gap",
        "end_window",
    )
    return options(wildcards, *keys)


def decode_options(wildcards):
    """Which records to call regions in, and how."""
    chosen = options(wildcards, "records", "min_record", "exclude")
    return f"{batch_options(wildcards)} {chosen} {circles(wildcards)}".rstrip()


def batches_options(wildcards):
    """Which records to decode and how, and how many bases in one job."""
    return f"{decode_options(wildcards)} --batch-bases {config['batch_bases']}"


def null_options(wildcards):
    """What null sequence there is to be; how it is called stands with the calls."""
    kind = SETTINGS[wildcards.assembly]["null_kind"]
    null = "" if kind is None else f"--null {kind} "
    return null + options(wildcards, "null_bases", "exclude", "seed")


def parts_of_nulls(wildcards):
    """How many jobs draw null sequence."""
    settings = SETTINGS[wildcards.assembly]
    bases = settings["null_bases"] or null_bases_of(most_bases(settings["fasta"]))
    return max(1, NULLS * bases // (BATCHES_OF_NULLS * config["batch_bases"]))


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


def calibrate_options(wildcards):
    """Null sequence, where it was drawn before, and which regions are kept."""
    words = f"{null_options(wildcards)} {options(wildcards, 'q')}"
    if wildcards.assembly in LARGE:
        folder = shlex.quote(f"{RESULTS}/{wildcards.assembly}")
        words += f" --nulls {folder}/nulls --parts {folder}/replicates"
    return words


def fold_options(wildcards):
    """How the model is compared with chains, and how much is held out at a time."""
    settings = SETTINGS[wildcards.assembly]
    keys = ["labels", "seed", "decoder"]
    if settings["states"] > 1 and all(settings[key] is None for key in STARTS):
        keys.append("states")
    how = f"--{settings['strands']} --folds {FOLDS}"
    return f"{how} {options(wildcards, *keys)} {survey_options(wildcards)}"


def folds_of(wildcards):
    """Folders of the folds of a comparison, each named by its number."""
    if wildcards.assembly not in LARGE:
        return []
    return [f"{RESULTS}/{wildcards.assembly}/folds/{fold + 1}" for fold in range(FOLDS)]


def compare_options(wildcards):
    """How the model is compared with chains, and where the folds are if they are done."""
    words = fold_options(wildcards)
    if wildcards.assembly in LARGE:
        folder = shlex.quote(f"{RESULTS}/{wildcards.assembly}")
        words += f" --parts {folder}/folds"
    return words


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
