"""The command ``batches``: share records out to jobs of about equal size."""

import numpy as np

from hmmseg.jobs.sources import Sources
from hmmseg.outputs import check_target, whole_folder
from hmmseg.provenance import write_provenance
from hmmseg.sequence.alphabet import MISSING

__all__ = ["batches"]


def batches(sources: Sources, output: str, batch_bases: int, force: bool) -> int:
    """Write lists of records, each for one ``decode --records``, and ``batches.tsv``.

    A batch is a run of consecutive records, so that results put together in the order of the
    batches are in the order of the records.

    Parameters
    ----------
    sources
        The sequence.
    output
        The folder to write.
    batch_bases
        A batch is full when another record would take it beyond this many known bases; a longer
        record is a batch of its own. A record without known bases joins the batch before it.
    force
        Replace an earlier result.

    Returns
    -------
    int
        How many batches there are.
    """
    check_target(output, force)
    filled: list[list[str]] = []
    sizes: list[int] = []
    for record in sources.read():
        # Known bases count: a batch of nothing but gaps would be refused as an assembly is.
        known = int(np.count_nonzero(record.bases != MISSING))
        if not filled or (sizes[-1] and known and sizes[-1] + known > batch_bases):
            filled.append([])
            sizes.append(0)
        filled[-1].append(record.name)
        sizes[-1] += known
    with whole_folder(output, force=force) as folder:
        written = [folder / "batches.tsv"]
        rows = ["batch\trecords\tknown_bases\n"]
        for number, (names, bases) in enumerate(zip(filled, sizes, strict=True), start=1):
            path = folder / f"batch-{number:04d}.txt"
            path.write_text("".join(f"{name}\n" for name in names), encoding="utf-8")
            rows.append(f"{path.stem}\t{len(names)}\t{bases}\n")
            written.append(path)
        written[0].write_text("".join(rows), encoding="utf-8")
        parameters = {**sources.parameters(), "batch_bases": batch_bases}
        write_provenance(folder, "batches", parameters, None, sources.files(), written)
    return len(filled)
