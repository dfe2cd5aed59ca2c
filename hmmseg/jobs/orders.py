"""The command ``orders``: how much context a Markov chain should have."""

from dataclasses import asdict
from typing import Any

from hmmseg.errors import TrainingError
from hmmseg.evidence.heldout import OrderRow, order_rows
from hmmseg.evidence.pieces import block_length, cut, deal
from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder, write_json
from hmmseg.provenance import write_provenance

__all__ = ["orders", "orders_table"]


def orders(
    sources: Sources,
    output: str,
    *,
    max_order: int,
    symmetric: bool,
    folds: int,
    block: int | None,
    force: bool,
) -> dict[str, Any]:
    """Write ``orders.json`` and ``orders.tsv``.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    max_order
        The highest order to try.
    symmetric
        Tie words to their reverse complement.
    folds
        Blocks are held out in so many turns.
    block
        Length of a block in bases; None for about 200 blocks.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``orders.json``.
    """
    check_target(output, force)
    contigs = [contig for _, found in sources.read_contigs() for contig in found]
    length = block or block_length(sum(len(contig) for contig in contigs))
    pieces = cut(contigs, length)
    try:
        rows = order_rows(pieces, deal(pieces, folds, False), max_order, symmetric)
    except TrainingError as error:
        raise TrainingError(f"{error} (--max-order {max_order})") from None
    document = {
        "format": "hmmseg-orders",
        "version": 1,
        "symmetric": symmetric,
        "folds": folds,
        "block": length,
        "best_by_bic": min(rows, key=lambda row: row.bic).order,
        "best_by_heldout": min(rows, key=lambda row: row.heldout_bits_per_base).order,
        "orders": [asdict(row) for row in rows],
    }
    with whole_folder(output, force=force) as folder:
        written = [folder / "orders.json", folder / "orders.tsv"]
        write_json(written[0], document)
        written[1].write_text(orders_table(rows), encoding="utf-8")
        parameters = {
            **sources.parameters(),
            "max_order": max_order,
            "symmetric": symmetric,
            "folds": folds,
            "block": length,
        }
        write_provenance(folder, "orders", parameters, None, sources.files(), written)
    return document


def orders_table(rows: list[OrderRow]) -> str:
    """Return rows as tab-separated text with a header."""
    lines = ["order\tparameters\tlog_likelihood\tbits_per_base\tbic\theldout_bits_per_base"]
    lines += [
        f"{row.order}\t{row.parameters}\t{row.log_likelihood:.3f}\t{row.bits_per_base:.6f}"
        f"\t{row.bic:.3f}\t{row.heldout_bits_per_base:.6f}"
        for row in rows
    ]
    return "\n".join(lines) + "\n"
