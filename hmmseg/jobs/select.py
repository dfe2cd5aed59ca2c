"""The commands ``select`` and ``recommend``: how many states, and which order."""

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError
from hmmseg.evidence.selection import (
    Block,
    Cell,
    Comparison,
    assess,
    compare,
    cut_blocks,
    why_not_assessable,
)
from hmmseg.jobs.sources import Sources
from hmmseg.outputs import PROVENANCE, check_target, whole_folder, write_json
from hmmseg.progress import Progress
from hmmseg.provenance import write_provenance
from hmmseg.report.selection import draw_selection
from hmmseg.training.restarts import Plan

__all__ = ["FORMAT", "recommend", "select", "table_of"]

FORMAT = "hmmseg-selection"
VERSION = 1
_FILE = "selection.json"


def select(
    sources: Sources,
    output: str,
    grid: Sequence[Plan],
    *,
    folds: int,
    train_bases: int | None,
    threads: int,
    force: bool,
) -> dict[str, Any]:
    """Assess every model of a grid, and write what was found.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    grid
        The models and how each is fitted; all with the same seed.
    folds
        Folds of the cross-validation.
    train_bases
        Use a seeded sample of about so many bases; None for everything.
    threads
        Threads to use; the result does not depend on it.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``selection.json``.
    """
    check_target(output, force)
    seed = grid[0].seed
    contigs, sampled = sources.read_sample(train_bases, seed)
    blocks = cut_blocks(contigs, folds, seed)
    cells = []
    steps = len(grid) * (1 + (0 if why_not_assessable(blocks, folds) else folds))
    with Progress(steps, "selecting", "fits") as progress:
        for plan in grid:
            label = f"{plan.states} states, order {plan.order}"
            watch = _watcher(progress, label)
            cells.append(assess(contigs, blocks, plan, threads, watch))
    document = _document([_block_entry(block) for block in blocks], cells, sampled)
    parameters = {
        **sources.parameters(),
        "grid": [[plan.states, plan.order] for plan in grid],
        "symmetric": grid[0].symmetric,
        "folds": folds,
        "restarts": [plan.restarts for plan in grid],
        "max_iterations": grid[0].max_iterations,
        "tolerance": grid[0].tolerance,
        "pseudocount": grid[0].pseudocount,
        "train_bases": train_bases,
    }
    with whole_folder(output, force=force) as folder:
        written = _write(folder, document)
        write_provenance(folder, "select", parameters, seed, sources.files(), written)
    return document


def recommend(folders: Sequence[str], output: str, force: bool) -> dict[str, Any]:
    """Put together what was found for parts of a grid, and recommend one model.

    Parameters
    ----------
    folders
        Written by ``select`` from the same sequence, with the same seed and folds.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``selection.json``.

    Raises
    ------
    OutputError
        A folder holds no selection, or one of other blocks, or a model is there twice.
    """
    check_target(output, force)
    documents = [_read(Path(name)) for name in folders]
    cells: dict[tuple[int, int], Cell] = {}
    for name, found in zip(folders, documents, strict=True):
        if found["blocks"] != documents[0]["blocks"]:
            raise OutputError(
                f"{name}: its blocks are not those of {folders[0]}; select both from the same "
                "sequence with the same options"
            )
        for entry in found["models"]:
            cell = _cell(entry)
            if (cell.states, cell.order) in cells:
                raise OutputError(
                    f"{name}: {cell.states} states of order {cell.order} are in an earlier folder"
                )
            cells[cell.states, cell.order] = cell
    ordered = [cells[key] for key in sorted(cells)]
    document = _document(documents[0]["blocks"], ordered, documents[0]["sampled"])
    inputs = [Path(name) / PROVENANCE for name in folders]
    with whole_folder(output, force=force) as folder:
        written = _write(folder, document)
        write_provenance(folder, "recommend", {}, None, inputs, written)
    return document


def table_of(document: dict[str, Any]) -> str:
    """Return the table ``selection.tsv`` of a selection."""
    rows = [
        "states\torder\tparameters\tlog_likelihood\tbic\theld_out_bits_per_base\tlost\t"
        "standard_error\tremark"
    ]
    for entry in document["models"]:
        numbers = [
            f"{entry[key]:.6f}" if entry[key] is not None else "NA"
            for key in ("held_out_bits_per_base", "lost", "standard_error")
        ]
        rows.append(
            f"{entry['states']}\t{entry['order']}\t{entry['parameters']}\t"
            f"{entry['log_likelihood']:.3f}\t{entry['bic']:.3f}\t" + "\t".join(numbers)
            + f"\t{entry['remark'] or 'NA'}"
        )  # fmt: skip
    return "\n".join(rows) + "\n"


def _watcher(progress: Progress, label: str) -> Any:
    return lambda what: progress.advance(1, f"{label}, {what}")


def _block_entry(block: Block) -> dict[str, Any]:
    return {
        "record": block.contig.record,
        "start": block.contig.start,
        "length": len(block.contig),
        "bases": block.bases,
        "fold": block.fold + 1,
    }


def _cell(entry: dict[str, Any]) -> Cell:
    return Cell(
        states=entry["states"],
        order=entry["order"],
        parameters=entry["parameters"],
        log_likelihood=entry["log_likelihood"],
        bic=entry["bic"],
        held_out=tuple(entry["held_out_bits"]),
        problem=entry["problem"],
    )


def _document(blocks: list[dict[str, Any]], cells: Sequence[Cell], sampled: bool) -> dict[str, Any]:
    compared = {id(c.cell): c for c in compare(cells, [block["bases"] for block in blocks])}
    lowest = min(cell.bic for cell in cells)
    entries = []
    for cell in cells:
        found: Comparison | None = compared.get(id(cell))
        remarks = [cell.problem] if cell.problem else []
        remarks += ["recommended"] if found and found.recommended else []
        remarks += ["lowest BIC"] if cell.bic == lowest else []
        entries.append(
            {
                "states": cell.states,
                "order": cell.order,
                "parameters": cell.parameters,
                "log_likelihood": cell.log_likelihood,
                "bic": cell.bic,
                "held_out_bits_per_base": found.bits_per_base if found else None,
                "lost": found.lost if found else None,
                "standard_error": found.standard_error if found else None,
                "remark": "; ".join(remarks),
                "problem": cell.problem,
                "held_out_bits": list(cell.held_out),
            }
        )
    return {
        "format": FORMAT,
        "version": VERSION,
        "sampled": sampled,
        "recommended": _recommendation(list(compared.values()), cells),
        "models": entries,
        "blocks": blocks,
    }


def _recommendation(compared: Sequence[Comparison], cells: Sequence[Cell]) -> dict[str, Any] | None:
    chosen = next((c for c in compared if c.recommended), None)
    if chosen is None:
        return None
    best = next(c for c in compared if c.lost == 0)
    states, order = chosen.cell.states, chosen.cell.order
    because = f"the best of {len(compared)} models by held-out bits per base"
    if chosen is not best:
        because = (
            f"the smallest model that is as good as the best, {best.cell.states} states of order "
            f"{best.cell.order}; it loses {chosen.lost:.2g} bits per base, standard error "
            f"{chosen.standard_error:.2g}"
        )
    tried = {cell.states for cell in cells}, {cell.order for cell in cells}
    edges = [
        f"{name} {value} is the most that was tried"
        for name, value, values in (("states", states, tried[0]), ("order", order, tried[1]))
        if value == max(values)
    ]
    return {"states": states, "order": order, "because": because, "caution": "; ".join(edges)}


def _write(folder: Path, document: dict[str, Any]) -> list[Path]:
    """Write everything but the provenance; return the files."""
    write_json(folder / _FILE, document)
    (folder / "selection.tsv").write_text(table_of(document), encoding="utf-8")
    cells = [_cell(entry) for entry in document["models"]]
    compared = compare(cells, [block["bases"] for block in document["blocks"]])
    if compared:
        draw_selection(folder / "selection.svg", compared)
    return sorted(folder.iterdir())


def _read(folder: Path) -> dict[str, Any]:
    path = folder / _FILE
    try:
        document = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        raise OutputError(f"{path}: cannot be read; give a folder written by select") from None
    if not isinstance(document, dict) or document.get("format") != FORMAT:
        raise OutputError(f"{path}: not a selection; give a folder written by select")
    return document
