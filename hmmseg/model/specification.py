"""What is wanted of a model: states with a name, a composition and an expected length.

A specification is no model yet: compositions may be relative to the genome at hand, to which
:mod:`hmmseg.model.anchoring` ties them. It is read from YAML, see
:mod:`hmmseg.model.specification_file`. Presets are specifications that come with the package.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace

from hmmseg.errors import ModelError

__all__ = ["DECODERS", "SOFT_MASK_POLICIES", "Specification", "StateWish"]

SOFT_MASK_POLICIES = ("use", "hide")
"""Lower-case bases are ordinary sequence, or missing."""

DECODERS = ("path", "posterior")
"""How regions are called, see :mod:`hmmseg.regions.calling`."""


@dataclass(frozen=True)
class StateWish:
    """One state as it is wanted.

    Attributes
    ----------
    name : str
        Of the state.
    reported : bool
        Whether its regions are reported.
    expected_length : float
        Mean length of a visit, in bases.
    gc : float or None
        GC fraction to start from.
    gc_odds : float or None
        The same relative to the genome: odds of G+C against A+T over the genome's odds.
    conditional : tuple or None
        Rows of P(base | context), contexts in alphabetical order.
    enriched : mapping of str to float
        Words and the factors by which they are more frequent than in the genome.
    independent : bool
        Start from the genome's bases without its use of words.
    stages : int
        Stages in series, which make lengths less variable.
    pseudocount : float
        Strength with which the composition is drawn to where it starts, in single-strand bases.
    length_pseudocount : float
        The same of the expected length.
    """

    name: str
    reported: bool
    expected_length: float
    gc: float | None = None
    gc_odds: float | None = None
    conditional: tuple[tuple[float, ...], ...] | None = None
    enriched: Mapping[str, float] | None = None
    independent: bool = False
    stages: int = 1
    pseudocount: float = 0.0
    length_pseudocount: float = 0.0


@dataclass(frozen=True)
class Specification:
    """Everything that is wanted of a model.

    Attributes
    ----------
    name : str
        Of the preset, or of the file.
    states : tuple of StateWish
        In the order of the model's states.
    order : int
        Context length in bases.
    symmetric : bool
        Whether both strands are treated alike.
    anchor : str or None
        The state whose table stands for the genome's own: the tables of the others count
        relative to it.
    soft_mask : str
        One of `SOFT_MASK_POLICIES`.
    trained : bool
        Whether Baum-Welch follows; otherwise the anchored model is used as it is.
    restarts : int
        Number of starting points.
    pseudocount : float
        Of each state, spread evenly over its words, in single-strand bases.
    fixed : tuple of str
        Parameters that training leaves as they are, see
        :class:`hmmseg.training.constraints.Fixed`.
    never : tuple of (str, str)
        Pairs of states; the second never follows the first. In a symmetric specification neither
        follows the other.
    decoder : str
        Proposed for calling regions: ``"path"`` or ``"posterior"`` over 0.5.
    min_length, merge_gap, end_window : int
        Likewise, in bases.
    purpose, finds, also_finds, source : str
        For people.
    """

    name: str
    states: tuple[StateWish, ...]
    order: int = 0
    symmetric: bool = True
    anchor: str | None = None
    soft_mask: str = "use"
    trained: bool = True
    restarts: int = 1
    pseudocount: float = 0.0
    fixed: tuple[str, ...] = ()
    never: tuple[tuple[str, str], ...] = ()
    decoder: str = "path"
    min_length: int = 1
    merge_gap: int = 0
    end_window: int = 0
    purpose: str = ""
    finds: str = ""
    also_finds: str = ""
    source: str = ""

    def with_order(self, order: int) -> "Specification":
        """Return the same with another order.

        Raises
        ------
        ModelError
            A state's words are given, which belong to the order they are given for.
        """
        if order == self.order:
            return self
        for wish in self.states:
            if wish.conditional is not None or wish.enriched is not None:
                raise ModelError(
                    f"state {wish.name} of {self.name} is given by words of {self.order + 1} "
                    f"bases, so the order stays {self.order}"
                )
        return replace(self, order=order)
