"""Result folders to make pages of: small ones by the commands themselves, from drawn sequence."""

from pathlib import Path

import numpy as np

from hmmseg.cli import main
from hmmseg.model import load_model
from hmmseg.outputs import write_json
from hmmseg.sequence.alphabet import decode
from hmmseg.simulate import simulate

__all__ = ["HOSTILE", "ROOT", "calibrate", "called", "small_assembly"]

ROOT = Path(__file__).resolve().parents[2]
MODEL = ROOT / "demo_data" / "model.json"

HOSTILE = (
    "plain",
    "<script>alert(1)</script>",
    "</script><img/src=x/onerror=alert(2)>",
    "\"double'single&amp;&lt;b&gt;",
    "n" * 200,
    "Übergröße-日本-ß",
    "$x^2$\\n{{title}}",
    "]]><!--",
)
"""Names of records; FASTA allows all of them."""


def small_assembly(path: Path, names: tuple[str, ...] = HOSTILE, length: int = 60_000) -> Path:
    """Write FASTA with a record of each name, drawn from the demo's model, with gaps."""
    lengths = [length - 2_000 * number for number in range(len(names))]
    drawn = simulate(load_model(MODEL), lengths, 7)
    with path.open("w", encoding="utf-8") as file:
        for number, (name, (bases, _)) in enumerate(zip(names, drawn, strict=True)):
            text = decode(np.asarray(bases))
            if number % 2:
                text = f"{text[:3000]}{'N' * 700}{text[3700:]}"
            file.write(f">{name}\n{text}\n")
    return path


def called(folder: Path, fasta: Path, *train: str) -> Path:
    """Survey, train and decode into a folder, as the workflow would; return the folder."""
    model = folder / "model.json"
    words = train or ("--init", str(MODEL), "--max-iterations", "3", "--restarts", "3")
    assert main(["survey", str(fasta), "--output", str(folder / "survey")]) == 0
    assert main(["train", str(fasta), "--output", str(model), *words]) == 0
    assert (
        main(["decode", str(fasta), "--model", str(model), "--output", str(folder / "calls")]) == 0
    )
    return folder


def calibrate(folder: Path) -> None:
    """Write a calibration, its numbers invented: what is tested is that a page shows them."""
    calls = (folder / "calls" / "regions.tsv").read_text(encoding="utf-8").splitlines()
    target = folder / "calibration"
    target.mkdir()
    rows = [f"{calls[0]}\texpected_by_chance\tp_value\tq_value"]
    for number, line in enumerate(calls[1:]):
        rows.append(f"{line}\t{0.01 * number:.4g}\t{0.001 * number:.4g}\t{0.007 * number:.4g}")
    states = list(dict.fromkeys(line.split("\t")[5] for line in calls[1:]))
    records = list(dict.fromkeys(line.split("\t")[1] for line in calls[1:]))
    tables = {
        "regions": rows,
        "false_regions": [
            "null\tstate\tscore\tnull_regions\tnull_regions_per_mb\tupper_per_mb\treal_regions",
            *(
                f"{null}\t{state}\t{score}\t{40 >> score}\t{(40 >> score) / 2}\t{(44 >> score) / 2}"
                f"\t{60 - 4 * score}"
                for null in ("chain", "drift")
                for state in states
                for score in range(8)
            ),
        ],
        "resolution": [
            "state\tformula_l50\tformula_l95\tsimulated_l50\tsimulated_l95",
            *(f"{state}\t120\t260\t131\tNA" for state in states),
        ],
        "detection": [
            "state\tlength\ttrials\tdetected",
            *(f"{s}\t{50 << k}\t200\t{min(200, 20 << k)}" for s in states for k in range(6)),
        ],
        "reliability": [
            "state\tlow\thigh\tbases\tmean_posterior\tobserved_fraction",
            *(
                f"{s}\t{k / 10}\t{(k + 1) / 10}\t{1000 * (k + 1)}\t{k / 10 + 0.05:.2f}"
                f"\t{k / 10 + 0.04:.2f}"
                for s in states
                for k in range(10)
            ),
        ],
        "false_discovery": [
            "state\tthreshold\tnominal_fdr\tobserved_fdr",
            *(f"{s}\t{t}\t{(1 - t) / 3:.3f}\t{(1 - t) / 2:.3f}" for s in states
              for t in (0.5, 0.9, 0.99)),
        ],
        "homogeneity": [
            "record\tbases\tgc\tsurprise_z\tcomposition_p\tadjusted_p\teffect\tverdict",
            *(
                f"{name}\t9000\t0.41\t{7.1 if k == 1 else 0.2}\t{0.00002 if k == 1 else 0.4}"
                f"\t{0.0002 if k == 1 else 0.9}\t0.12\t{'differs' if k == 1 else 'fits'}"
                for k, name in enumerate(records)
            ),
        ],
        "lengths": [
            "state\tlength\tobserved\texpected",
            *(f"{s}\t{100 << k}\t{9 - k}\t{8.5 - k}" for s in states for k in range(6)),
        ],
    }  # fmt: skip
    for name, lines in tables.items():
        (target / f"{name}.tsv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    write_json(
        target / "calibration.json",
        {
            "format": "hmmseg-calibration",
            "version": 1,
            "null": "chain",
            "null_bases": 20_000_000,
            "smallest_q": 0.001,
            "q": 0.05,
            "kept": 8,
            "statements": {"significance": "The statement about significance stands here."},
        },
    )
