"""Prints what the checks find, every bit of it, for comparison between processors."""

import numpy as np

from hmmseg.evidence.durations import Sampler
from hmmseg.evidence.homogeneity import Judge
from hmmseg.evidence.reliability import called_table, curve_table, reliability_of_states
from hmmseg.evidence.resolution import resolution
from hmmseg.evidence.stretches import Words
from hmmseg.evidence.typical import DRAWN_LENGTHS, typical_blocks
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate
from tests.evidence.planted import LIMIT_MODELS


def main() -> None:
    """Print one line for each number or row."""
    model = LIMIT_MODELS["words"]
    for one in resolution(model, 1):
        print([value.hex() for value in (*one.formula, *one.simulated)], one.curve)
    lengths = [70_000, 30_000, 8_000, 45_000, 61_000]
    found = reliability_of_states(model, simulate(model, lengths, 2))
    for table in (curve_table(found), called_table(found)):
        print(table.map(lambda x: x.hex() if isinstance(x, float) else x).to_csv())
    blocks = (one.bases for one in simulate(model, DRAWN_LENGTHS[:40], 3))
    words, sampler = Words.of(model), Sampler(model, sum(lengths), 5)
    contigs = [
        Contig(f"r{number}", 0, one.bases, False, len(one.bases))
        for number, one in enumerate(simulate(model, lengths, 4))
    ]
    total = np.sum([words.counts(one, 0, len(one)) for one in contigs], axis=0)
    judge = Judge(model, typical_blocks(model, blocks), total)
    for contig in contigs:
        judge.add(contig.record, [contig])
        sampler.add(contig)
    for record in judge.judgement().records:
        print([x.hex() if isinstance(x, float) else x for x in vars(record).values()])
    for visits in sampler.durations():
        print(visits.p_value.hex(), visits.misplaced.hex(), visits.middle)
        print([(one.length, one.observed, one.expected.hex()) for one in visits.bins])


if __name__ == "__main__":
    main()
