"""The section *The model*: what its states emit, how long they last, and what follows what."""

from math import isfinite

from hmmseg.evidence.cautions import cautions
from hmmseg.evidence.findings import describe
from hmmseg.model import Model
from hmmseg.report.colours import GREY, colour_of
from hmmseg.report.evidence_figures import draw_lengths
from hmmseg.report.model_figures import draw_emissions
from hmmseg.report.parts import Item, Missing, Part, Picture, Section, Table, Text
from hmmseg.report.results import Results
from hmmseg.report.sure import calibrate_command
from hmmseg.report.words import count, decimals, in_bases, listed, percent, plural

__all__ = ["shape_section"]


def shape_section(results: Results) -> Section:
    """Return the section."""
    title, model = "The model", results.model
    if model is None:
        command = f"hmmseg train FASTA --output {results.folder.name}/model.json"
        return Section(
            "model", title, "There is no model yet.", [Part("", [Missing("Training", command)])]
        )
    parts = [_states(model), _emissions(model), _transitions(model), _lengths(results)]
    return Section("model", title, _conclusion(model), parts)


def _conclusion(model: Model) -> str:
    if model.states == 1:
        return f"A Markov chain of order {model.order}, without hidden states."
    shown = [
        f"{row.name} is {row.text}" for row in describe(model) if row.reported or model.states < 4
    ]
    strands = "the same on both strands" if model.symmetric else "of the strand as written"
    return f"{plural(model.states, 'state')} of order {model.order}, {strands}: {'; '.join(shown)}."


def _states(model: Model) -> Part:
    rows = [
        [
            row.name,
            "yes" if row.reported else "no",
            percent(row.gc),
            decimals(row.cpg_observed_expected, 2),
            in_bases(row.expected_length),
            count(stages),
            percent(row.share),
            ", ".join(f"{word} {times:.2f} times" for word, times in row.words) or "none",
        ]
        for row, stages in zip(describe(model), model.stages, strict=True)
    ]
    heads = ["state", "reported", "G+C", "CpG of expected", "mean length", "stages", "share",
             "words that stand out"]  # fmt: skip
    training = model.training or {}
    trained = training.get("bases") if training.get("iterations", 0) else None
    found = cautions(model, trained if isinstance(trained, int) else None)
    items: list[Item] = [Table(heads, rows, "The states, by the model's parameters.", 2)]
    items += [Text(f"Caution: {line}.") for line in found]
    return Part("States", items)


def _emissions(model: Model) -> Part:
    if model.states == 1:
        return Part("Emissions", [], "With one state there is no background to compare with.")
    colours = {
        state: colour_of(number)
        for number, state in enumerate(s for s in range(model.states) if model.reported[s])
    }
    items = [
        Picture(
            f"emissions-{model.names[state]}",
            f"Words of state {model.names[state]}: to the right those that it has more often"
            f"{'; a word stands for its reverse complement, too' if model.symmetric else ''}.",
            draw_emissions(model, state, colours.get(state, GREY)),
        )
        for state in range(model.states)
        if model.reported[state] or not colours
    ]
    strongest = [
        f"{row.name} by {row.words[0][0]}, {row.words[0][1]:.2f} times as frequent"
        for row in describe(model)
        if row.reported and row.words
    ]
    text = f"What sets a state apart most: {listed(strongest)}." if strongest else ""
    return Part("Emissions", items, text)


def _transitions(model: Model) -> Part:
    rows = [
        [name, *(f"{value:.6g}" for value in row)]
        for name, row in zip(model.names, model.transitions.tolist(), strict=True)
    ]
    table = Table(
        ["from", *(f"to {name}" for name in model.names)], rows,
        "Probability of the next base's state; with stages, the diagonal is the chance to stay in "
        "a stage.",
    )  # fmt: skip
    lengths = [
        f"{name} {in_bases(float(length))}"
        for name, length in zip(model.names, model.expected_lengths, strict=True)
        if isfinite(length)
    ]
    text = f"A visit lasts on average: {listed(lengths)}." if lengths else ""
    return Part("Transitions and expected lengths", [table], text)


def _lengths(results: Results) -> Part:
    title = "Lengths of regions"
    table = results.tables.get("lengths")
    if table is None or not len(table):
        command = calibrate_command(results.folder.name)
        return Part(title, [Missing("Observed against expected lengths", command)])
    said = (results.calibration or {}).get("statements", {}).get("lengths", "")
    items = [
        Picture(
            f"lengths-{state}", f"Regions of {state} by length, and what the model expects.", drawn
        )
        for state, drawn in draw_lengths(table)
    ]
    return Part(title, items, said or "Observed lengths of regions beside the expected ones.")
