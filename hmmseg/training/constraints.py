"""What training is told beforehand: pseudo-counts, and parameters that stay as they are."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.model import Model

__all__ = ["NOTHING_FIXED", "NO_PRIOR", "Fixed", "Prior"]


@dataclass(frozen=True, eq=False)
class Prior:
    """Dirichlet pseudo-counts, in bases of one strand: what was as good as seen already.

    Attributes
    ----------
    words : float64[state, 4**(order + 1)], or None
        Of every word in every state.
    steps : float64[state, state], or None
        Of transitions; the diagonal counts stays within a stage.
    """

    words: NDArray[np.float64] | None = None
    steps: NDArray[np.float64] | None = None

    @property
    def bases(self) -> float:
        """All pseudo-counts together."""
        return sum(float(counts.sum()) for counts in (self.words, self.steps) if counts is not None)

    @classmethod
    def even(cls, model: Model, bases: float) -> "Prior":
        """Return pseudo-counts spread evenly over the words of each state.

        Parameters
        ----------
        model
            Gives states and order.
        bases
            Strength for each state, all words together.
        """
        words = model.joint.shape[1]
        return cls(np.full((model.states, words), bases / words)) if bases > 0 else NO_PRIOR

    @classmethod
    def around(
        cls, model: Model, emission: NDArray[np.float64], transition: NDArray[np.float64]
    ) -> "Prior":
        """Return pseudo-counts that draw parameters to those of a model.

        Parameters
        ----------
        model
            Where parameters are drawn to.
        emission, transition
            float64[state]: strength for each state's words, and for its transitions.
        """
        return cls(model.joint * emission[:, None], model.transitions * transition[:, None])


@dataclass(frozen=True)
class Fixed:
    """Parameters that training leaves as they are.

    Attributes
    ----------
    tables : frozenset of int
        States whose emissions stay.
    lengths : frozenset of int
        States whose expected length stays.
    leaving : bool
        Where states lead to when they are left, stays.
    start : bool
        A free start stays.
    """

    tables: frozenset[int] = field(default_factory=frozenset)
    lengths: frozenset[int] = field(default_factory=frozenset)
    leaving: bool = False
    start: bool = False

    @classmethod
    def named(cls, model: Model, names: tuple[str, ...]) -> "Fixed":
        """Return what a list of names fixes.

        Parameters
        ----------
        model
            Gives the states.
        names
            Each ``STATE.emissions``, ``STATE.length``, ``transitions`` (lengths and where
            states lead to) or ``start``.

        Raises
        ------
        ModelError
            A name is none of these; lists what is possible.
        """
        tables: set[int] = set()
        lengths: set[int] = set()
        possible: dict[str, tuple[set[int], int] | None] = {"transitions": None, "start": None}
        for state, name in enumerate(model.names):
            possible[f"{name}.emissions"] = (tables, state)
            possible[f"{name}.length"] = (lengths, state)
        for name in names:
            if name not in possible:
                raise ModelError(
                    f"fixed: '{name}' is no parameter; there are {', '.join(sorted(possible))}"
                )
            target = possible[name]
            if target is not None:
                target[0].add(target[1])
        if "transitions" in names:
            lengths = set(range(model.states))
        return cls(frozenset(tables), frozenset(lengths), "transitions" in names, "start" in names)


NO_PRIOR = Prior()
NOTHING_FIXED = Fixed()
