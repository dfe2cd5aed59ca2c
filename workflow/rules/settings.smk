# Configuration and sample sheet: checked, merged, and what follows for the run as a whole.
import csv
import math
import re
import time
from functools import cache
from pathlib import Path

from snakemake.exceptions import WorkflowError
from snakemake.utils import validate

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
