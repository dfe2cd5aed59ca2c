# What the rules say on the command line: options for a wildcard, made from its settings.
import shlex


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


def compare_options(wildcards):
    """How the model is compared with chains, and where the folds are if they are done."""
    words = fold_options(wildcards)
    if wildcards.assembly in LARGE:
        folder = shlex.quote(f"{RESULTS}/{wildcards.assembly}")
        words += f" --parts {folder}/folds"
    return words
