"""A chain as a machine: its transitions, and the share of each history in the long run."""

from collections import Counter

import numpy as np
import pytest
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.model.chain import ChainMachine, chain_machine, with_stationary_start
from hmmseg.model.dimension import chain_parameters, free_parameters
from hmmseg.model.parameters import Model
from hmmseg.training.chains import chain_of_words, fit_chain
from tests.reference import Piece
from tests.strategies import contig_of, model_of, random_parameters, segmented_bases


def counted(order: int, length: int, closed: bool, symmetric: bool = False) -> tuple[Model, str]:
    """Return the maximum-likelihood chain of a random sequence, and the sequence as letters."""
    bases = segmented_bases(np.random.default_rng([order, length]), length)
    fit = fit_chain([contig_of(Piece(bases, closed))], order, symmetric)
    return fit.model, "".join("ACGT"[base] for base in bases)


def frequencies(text: str, size: int, closed: bool) -> dict[str, float]:
    """Return the share of each word, counted one by one; a circle has as many as bases."""
    around = text + text[: size - 1] if closed and size > 1 else text
    words = [around[at : at + size] for at in range(len(around) - size + 1)]
    return {word: count / len(words) for word, count in Counter(words).items()}


def differences(machine: ChainMachine, wanted: dict[str, float]) -> NDArray[np.float64]:
    shares = [wanted.get(machine.word(h), 0.0) for h in range(machine.histories)]
    return np.abs(machine.stationary - shares)


@pytest.mark.parametrize("order", range(1, 9))
@pytest.mark.parametrize("length", [500, 20_000])
def test_circle_has_its_words_frequencies(order: int, length: int) -> None:
    """Every word of a circle ends as often as it begins, so its frequencies are stationary."""
    model, text = counted(order, length, closed=True)
    assert differences(chain_machine(model), frequencies(text, order, True)).max() < 1e-12


@pytest.mark.parametrize("order", range(1, 9))
@pytest.mark.parametrize("length", [5_000, 50_000])
def test_line_has_nearly_its_words_frequencies(order: int, length: int) -> None:
    model, text = counted(order, length, closed=False)
    largest = differences(chain_machine(model), frequencies(text, order, False)).max()
    assert largest < 2 * order / length


@pytest.mark.parametrize("order", [0, 1, 2, 3, 5])
def test_stationary_distribution_stays(order: int) -> None:
    """Against the linear equations, solved by another method."""
    rng = np.random.default_rng(order)
    model = chain_of_words(rng.random(4 ** (order + 1)) ** 3, order, symmetric=False)
    machine = chain_machine(model)
    dense = np.zeros((machine.histories, machine.histories))
    rows = machine.transitions()
    for history in range(machine.histories):
        for at in range(rows.offsets[history], rows.offsets[history + 1]):
            dense[history, rows.columns[at]] += rows.values[at]
    assert dense.sum(axis=1) == pytest.approx(1, abs=1e-13)
    equations = np.vstack([dense.T - np.eye(len(dense)), np.ones(len(dense))])
    wanted = np.linalg.lstsq(equations, np.append(np.zeros(len(dense)), 1.0), rcond=None)[0]
    assert machine.stationary == pytest.approx(wanted, abs=1e-12)


def test_transitions_are_sparse_and_shift_the_history() -> None:
    words = np.zeros(64)
    words[[0b000001, 0b000111, 0b011110, 0b111001, 0b100100]] = [2, 1, 1, 1, 1]
    machine = chain_machine(chain_of_words(words, 2, symmetric=False))
    rows = machine.transitions()
    at = slice(rows.offsets[0], rows.offsets[1])
    # AA was followed by C twice and never by another base; the next history is AC.
    assert (rows.columns[at].tolist(), rows.symbols[at].tolist()) == ([1], [1])
    assert rows.values[at].tolist() == [1.0]
    assert (rows.values > 0).all()
    assert [machine.word(h) for h in (0, 1, 6, 15)] == ["AA", "AC", "CG", "TT"]


def test_two_halves_have_no_single_stationary_distribution() -> None:
    words = np.zeros(16)
    words[[0, 15]] = 1  # A after A, T after T
    words[[5, 10]] = 1
    with pytest.raises(ModelError, match="never both recur"):
        _ = chain_machine(chain_of_words(words, 1, symmetric=False)).stationary


def test_a_machine_that_cycles_is_settled() -> None:
    """ACGTACGT... at order 5: four of 1,024 histories, visited in turn."""
    bases = np.tile(np.arange(4, dtype=np.uint8), 50)
    machine = chain_machine(fit_chain([contig_of(Piece(bases, True))], 5, False).model)
    used = machine.stationary[machine.stationary > 1e-9]
    assert used == pytest.approx([0.25] * 4, abs=1e-12)


def test_stationary_start_keeps_the_conditionals() -> None:
    model, _ = counted(2, 300, closed=False)
    started = with_stationary_start(model)
    machine, other = chain_machine(model), chain_machine(started)
    visited = machine.stationary > 0
    assert other.table[visited] == pytest.approx(machine.table[visited], abs=1e-12)
    words = started.joint.reshape(4, 4, 4)
    # Whether a word of two is looked at as first or as last bases makes no difference.
    assert words.sum(axis=0) == pytest.approx(words.sum(axis=2), abs=1e-12)


def test_a_model_of_two_states_is_no_chain() -> None:
    model = model_of(random_parameters(np.random.default_rng(1), 2, 1))
    with pytest.raises(ModelError, match="2 states"):
        chain_machine(model)


@pytest.mark.parametrize("order", range(4))
def test_free_parameters_of_symmetric_chains(order: int) -> None:
    """The rank of all constraints on a table of words, found numerically."""
    words = 4 ** (order + 1)
    texts = [np.base_repr(w, 4).zfill(order + 1) for w in range(words)]
    mirror = [int("".join(str(3 - int(b)) for b in reversed(t)), 4) for t in texts]
    rows = [np.ones(words)]
    for word, other in enumerate(mirror):
        row = np.zeros(words)
        row[word] += 1
        row[other] -= 1
        rows.append(row)
    for part in range(4**order):
        row = np.zeros(words)
        for word in range(words):
            row[word] += (word // 4 == part) - float(word % 4**order == part)
        rows.append(row)
    rank = int(np.linalg.matrix_rank(np.array(rows)))
    assert chain_parameters(order, True) == words - rank
    assert chain_parameters(order, False) == 3 * 4**order


def test_free_parameters_of_models() -> None:
    rng = np.random.default_rng(1)
    # Three states of order 0: GC each, six flows that sum to 1; or 3 + 3 + 3, 6 and 2.
    assert free_parameters(model_of(random_parameters(rng, 3, 0, "symmetric"))) == 3 + 5
    assert free_parameters(model_of(random_parameters(rng, 3, 0, "stationary"))) == 9 + 6
    assert free_parameters(model_of(random_parameters(rng, 3, 0, "free"))) == 9 + 6 + 2
