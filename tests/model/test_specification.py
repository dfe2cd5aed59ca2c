"""What is wanted, in YAML: read, or refused by the name of the key."""

from pathlib import Path

import pytest

from hmmseg.errors import ModelError
from hmmseg.model.specification_file import load_specification, read_specification

GOOD = """
order: 1
pseudocount: 16
states:
  - {name: plain, reported: false, expected_length: 5000}
  - {name: rich, expected_length: 800.5, gc_odds: 2, enriched: {CG: 3}}
"""


def test_what_is_said_is_kept_and_the_rest_has_defaults() -> None:
    wanted = read_specification(GOOD, "mine", "mine.yaml")
    assert (wanted.name, wanted.order, wanted.pseudocount) == ("mine", 1, 16)
    assert (wanted.symmetric, wanted.soft_mask, wanted.trained) == (True, "use", True)
    plain, rich = wanted.states
    assert (plain.name, plain.reported, plain.expected_length) == ("plain", False, 5000)
    assert (rich.reported, rich.gc_odds, rich.enriched) == (True, 2, {"CG": 3})


@pytest.mark.parametrize(
    ("old", "new", "named"),
    [
        ("order: 1", "order: nine", "order:"),
        ("order: 1", "order: true", "order:"),
        ("order: 1", "odrer: 1", "odrer: unknown key"),
        ("pseudocount: 16", "pseudocount: -1", "pseudocount:"),
        ("pseudocount: 16", "soft_mask: maybe", "soft_mask:"),
        ("pseudocount: 16", "anchor: plain", "anchor:"),
        ("pseudocount: 16", "trained: 'yes'", "trained:"),
        ("name: plain", "name: a b", r"states\[0\].name:"),
        ("name: plain", "name: rich", "rich"),
        ("expected_length: 5000", "gc: 0.5", r"states\[0\].expected_length: missing"),
        ("expected_length: 5000", "expected_length: 0.5", r"states\[0\].expected_length:"),
        ("expected_length: 5000", "expected_length: .nan", r"states\[0\].expected_length:"),
        ("gc_odds: 2", "gc: 60", r"states\[1\].gc:"),
        ("gc_odds: 2", "gc: 0.5, gc_odds: 2", r"states\[1\].gc:"),
        ("gc_odds: 2", "colour: red", r"states\[1\].colour: unknown key"),
        ("{CG: 3}", "{CGT: 3}", r"states\[1\].enriched: 'CGT'"),
        ("{CG: 3}", "{CG: 0}", r"states\[1\].enriched.CG"),
        ("{CG: 3}", "{}", r"states\[1\].enriched"),
        ("enriched: {CG: 3}", "conditional: [[1, 0, 0, 0]]", r"states\[1\].conditional:"),
        (
            "enriched: {CG: 3}",
            "conditional: [[0.5, 0.5, 0.5, 0], [1, 0, 0, 0], [1, 0, 0, 0], [1, 0, 0, 0]]",
            r"states\[1\].conditional\[0\]",
        ),
        ("gc_odds: 2", "stages: 0", r"states\[1\].stages:"),
        ("gc_odds: 2", "stages: 900", r"states\[1\].stages:"),
        ("expected_length: 5000", "expected_length: 3, stages: 4", "expected_length: 3"),
        ("gc_odds: 2", "length_pseudocount: -1", r"states\[1\].length_pseudocount:"),
        ("pseudocount: 16", "fixed: plain.length", "fixed: must be a list"),
        ("pseudocount: 16", "fixed: [plain.gc]", "fixed: 'plain.gc' is no parameter"),
        ("pseudocount: 16", "never: [[plain, poor]]", r"never\[0\]: 'poor' is no state"),
        ("pseudocount: 16", "never: [[plain, plain]]", r"never\[0\]: must be two"),
        ("pseudocount: 16", "never: 3", "never: must be a list"),
        ("states:", "states: []\nx:", "unknown key"),
        ("order: 1", "order: [1", "line"),
    ],
)
def test_what_is_not_possible_is_refused_by_name(
    tmp_path: Path, old: str, new: str, named: str
) -> None:
    path = tmp_path / "mine.yaml"
    path.write_text(GOOD.replace(old, new), encoding="utf-8")
    with pytest.raises(ModelError, match=named) as caught:
        load_specification(path)
    assert str(caught.value).startswith(str(path))
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("content", [b"", b"\xff\xfe\x00", b"- 1\n", b"states: 3\n"])
def test_other_files_are_refused(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "mine.yaml"
    path.write_bytes(content)
    with pytest.raises(ModelError, match=r"mine\.yaml"):
        load_specification(path)
    with pytest.raises(ModelError, match="cannot be read"):
        load_specification(tmp_path / "absent.yaml")
