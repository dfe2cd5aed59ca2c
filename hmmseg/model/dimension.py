"""How many numbers of a model are free, as information criteria count them."""

from hmmseg.model.parameters import FREE, Model

__all__ = ["chain_parameters", "free_parameters"]


def chain_parameters(order: int, symmetric: bool) -> int:
    """Return the free parameters of a chain of an order.

    A stranded chain has three for each context. A symmetric one has as many as there are
    distributions of words of ``order + 1`` bases that equal their reverse complement and whose
    first and last ``order`` bases are distributed alike: the classes of such words, less one for
    the sum, less one for each pair of words of ``order`` bases.

    Parameters
    ----------
    order
        Context length in bases.
    symmetric
        Whether words are tied to their reverse complement.
    """
    if not symmetric:
        return 3 * 4**order
    pairs = 4**order - _classes(order)
    return _classes(order + 1) - 1 - pairs


def free_parameters(model: Model) -> int:
    """Return the free parameters of a model: emissions, transitions and start.

    Reversible transitions of K states have K (K + 1) / 2 - 1, others K (K - 1).
    """
    count = model.states
    emissions = count * chain_parameters(model.order, model.symmetric)
    transitions = count * (count + 1) // 2 - 1 if model.symmetric else count * (count - 1)
    return emissions + transitions + (count - 1 if model.start_kind == FREE else 0)


def _classes(length: int) -> int:
    """Return how many words of a length differ when a word equals its reverse complement."""
    own_mirror = 2**length if length % 2 == 0 else 0
    return (4**length + own_mirror) // 2
