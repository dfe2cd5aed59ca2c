"""Random models and sequences, and how to hand them to hmmseg."""

from typing import NamedTuple

import numpy as np
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.model.parameters import Model
from hmmseg.sequence.contigs import Contig
from tests.fifty_digits import stationary
from tests.reference import MISSING, Parameters, Piece

__all__ = [
    "Texture",
    "contig_of",
    "contigs_of",
    "learning_cases",
    "model_of",
    "parameters_of",
    "random_bases",
    "random_parameters",
    "segmented_bases",
]


def model_of(p: Parameters) -> Model:
    """Return the model of hmmseg with these parameters."""
    return Model(
        names=tuple(f"s{state}" for state in range(p.states)),
        reported=tuple(state > 0 for state in range(p.states)),
        order=p.order,
        symmetric=p.symmetric,
        start_kind=p.start_kind,
        start=None if p.start_kind == "stationary" else p.start,
        transitions=p.transitions,
        joint=p.joint,
    )


def parameters_of(model: Model) -> Parameters:
    """Return the parameters that a model of hmmseg holds."""
    return Parameters(
        model.order,
        model.symmetric,
        model.start_kind,
        np.asarray(model.start_probabilities, dtype=np.float64),
        np.asarray(model.transitions, dtype=np.float64),
        np.asarray(model.joint, dtype=np.float64),
    )


def contig_of(piece: Piece, record: str = "r", start: int = 0) -> Contig:
    """Return the contig of hmmseg with these bases."""
    bases = np.asarray(piece.bases, dtype=np.uint8)
    return Contig(
        record=record,
        start=start,
        bases=bases,
        closed=piece.closed,
        record_length=len(bases),
    )


def contigs_of(pieces: list[Piece]) -> list[Contig]:
    """Return one contig per piece, each of a record of its own."""
    return [contig_of(piece, f"r{number}") for number, piece in enumerate(pieces)]


def _word_complements(order: int) -> NDArray[np.int64]:
    """Return the index of the reverse complement of every word of ``order + 1`` bases."""
    words = np.arange(4 ** (order + 1))
    flipped = np.zeros_like(words)
    rest = words.copy()
    for _ in range(order + 1):
        flipped = 4 * flipped + (3 - rest % 4)
        rest //= 4
    return flipped


class Texture(NamedTuple):
    """How random parameters are spread.

    Attributes
    ----------
    evenness : float
        Shape of the gamma distribution of all weights; small is uneven, near zero at places.
    stay : float
        Weight of remaining in a state, added to weights of about one for every transition.
    """

    evenness: float = 1.0
    stay: float = 1.0


def random_parameters(
    rng: np.random.Generator,
    states: int,
    order: int,
    kind: str = "free",
    texture: Texture | None = None,
) -> Parameters:
    """Draw a model.

    `kind` is ``free`` or ``stationary``, which is the start, or ``symmetric``: joint tables
    equal to their reverse complement, transitions in detailed balance, a stationary start.
    """
    texture = texture or Texture()
    # A floor keeps every draw clear of zero, so that no row is empty.
    weights = rng.gamma(texture.evenness, size=(states, states)) + 1e-9
    joint = rng.gamma(texture.evenness, size=(states, 4 ** (order + 1))) + 1e-9
    if kind == "symmetric":
        weights = weights + weights.T
        joint = joint + joint[:, _word_complements(order)]
    weights[np.diag_indices(states)] += texture.stay
    transitions = weights / weights.sum(axis=1, keepdims=True)
    joint /= joint.sum(axis=1, keepdims=True)
    free = kind == "free"
    return Parameters(
        order=order,
        symmetric=kind == "symmetric",
        start_kind="free" if free else "stationary",
        start=rng.dirichlet(np.ones(states)) if free else stationary(transitions),
        transitions=transitions,
        joint=joint,
    )


def random_bases(rng: np.random.Generator, length: int, missing: float = 0.0) -> NDArray[np.uint8]:
    """Draw independent bases, a share of them missing."""
    bases = rng.integers(0, 4, size=length, dtype=np.uint8)
    bases[rng.random(length) < missing] = MISSING
    return bases


def segmented_bases(
    rng: np.random.Generator, length: int, missing: float = 0.0
) -> NDArray[np.uint8]:
    """Draw bases whose composition changes every hundred bases or so."""
    parts: list[NDArray[np.int64]] = []
    while sum(map(len, parts)) < length:
        composition = rng.dirichlet(np.full(4, 2.0))
        parts.append(rng.choice(4, size=int(rng.integers(20, 300)), p=composition))
    bases = np.concatenate(parts)[:length].astype(np.uint8)
    bases[rng.random(length) < missing] = MISSING
    return bases


@st.composite
def learning_cases(draw: st.DrawFn, max_contigs: int = 12) -> tuple[Parameters, list[Piece]]:
    """Draw a model of any kind and contigs of 60 to 2,000 bases, 3 % of them missing."""
    states = draw(st.integers(1, 4), label="states")
    order = draw(st.integers(0, 3), label="order")
    kind = draw(st.sampled_from(["symmetric", "stationary", "free"]), label="kind")
    evenness = draw(st.sampled_from([0.2, 1.0, 5.0]), label="evenness")
    stay = draw(st.sampled_from([0.0, 3.0, 200.0]), label="stay")
    lengths = draw(st.lists(st.integers(60, 2000), min_size=1, max_size=max_contigs))
    seed = draw(st.integers(0, 2**32 - 1), label="seed")
    rng = np.random.default_rng(seed)
    p = random_parameters(rng, states, order, kind, Texture(evenness, stay))
    return p, [Piece(segmented_bases(rng, length, 0.03)) for length in lengths]
