"""The command ``machine``: a chain as a machine over the last bases, in tables."""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from hmmseg.errors import ModelError
from hmmseg.kernels.elementary import LN2, log_array
from hmmseg.model import load_model
from hmmseg.model.chain import ChainMachine, chain_machine
from hmmseg.outputs import check_target, whole_folder, write_json
from hmmseg.provenance import write_provenance

__all__ = ["machine"]


def machine(model_path: str, output: str, force: bool) -> dict[str, Any]:
    """Write ``transitions.tsv``, ``stationary.tsv`` and ``machine.json`` of a chain.

    Parameters
    ----------
    model_path
        A model document with one state.
    output
        The folder to write.
    force
        Replace an earlier result.

    Returns
    -------
    dict
        The document ``machine.json``.

    Raises
    ------
    ModelError
        The model has several states, or no single stationary distribution.
    """
    check_target(output, force)
    model = load_model(model_path)
    try:
        chain = chain_machine(model)
        document = _description(chain)
    except ModelError as error:
        raise ModelError(f"{model_path}: {error}") from None
    with whole_folder(output, force=force) as folder:
        written = [folder / n for n in ("machine.json", "stationary.tsv", "transitions.tsv")]
        write_json(written[0], document)
        for path, lines in ((written[1], _shares(chain)), (written[2], _steps(chain))):
            with path.open("w", encoding="utf-8", newline="\n") as file:
                file.writelines(lines)
        parameters = {"model": Path(model_path)}
        write_provenance(folder, "machine", parameters, None, [model_path], written)
    return document


def _description(chain: ChainMachine) -> dict[str, Any]:
    rows = chain.transitions()
    logs = log_array(rows.values)
    weights = chain.stationary.repeat(rows.offsets[1:] - rows.offsets[:-1])
    moved = chain.step(chain.stationary)
    return {
        "format": "hmmseg-machine",
        "version": 1,
        "order": chain.order,
        "histories": chain.histories,
        "transitions": len(rows.values),
        "recurrent_histories": int((chain.stationary > 0).sum()),
        "bits_per_base": float(-(weights * rows.values * logs).sum() / LN2),
        "stationary_residual": float(abs(moved - chain.stationary).sum()),
    }


def _shares(chain: ChainMachine) -> Iterator[str]:
    yield "history\tprobability\n"
    for history, share in enumerate(chain.stationary.tolist()):
        yield f"{chain.word(history) or '-'}\t{share!r}\n"


def _steps(chain: ChainMachine) -> Iterator[str]:
    yield "history\tbase\tnext_history\tprobability\n"
    rows = chain.transitions()
    counts = rows.offsets[1:] - rows.offsets[:-1]
    histories = [h for h, count in enumerate(counts.tolist()) for _ in range(count)]
    columns = (histories, rows.symbols.tolist(), rows.columns.tolist(), rows.values.tolist())
    for history, symbol, following, value in zip(*columns, strict=True):
        before, behind = chain.word(history) or "-", chain.word(following) or "-"
        yield f"{before}\t{'ACGT'[symbol]}\t{behind}\t{value!r}\n"
