"""The model document: one JSON file that a person can read, write and check.

An example of order 0, complete::

    {
      "format": "hmmseg-model", "version": 1,
      "order": 0, "symmetric": true, "start": "stationary",
      "states": [
        {"name": "plain", "reported": false, "joint": [0.33, 0.17, 0.17, 0.33]},
        {"name": "rich", "reported": true, "joint": [0.20, 0.30, 0.30, 0.20]}
      ],
      "transitions": [[0.999, 0.001], [0.002, 0.998]]
    }

``joint`` lists the probabilities of all words of ``order + 1`` bases in alphabetical order.
Instead, ``conditional`` may give one row of four probabilities for each context, alphabetical
too; the joint table is then that of the stationary chain. ``start`` may be a list. A state may
have ``stages`` in series, which make its length less variable; the diagonal of the transitions
is then the chance to stay in a stage.
"""

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError
from hmmseg.model.parameters import FREE, MAX_ORDER, STATIONARY, Model
from hmmseg.model.stationary import stationary_distribution

__all__ = [
    "FORMAT",
    "VERSION",
    "is_plain_name",
    "joint_of_chain",
    "load_model",
    "model_from_dict",
    "model_to_dict",
]

FORMAT = "hmmseg-model"
VERSION = 1

_KEYS = {"format", "version", "order", "symmetric", "start", "states", "transitions", "training"}
_OPTIONAL = {"training"}
_STATE_KEYS = {"name", "reported", "stages", "joint", "conditional"}
_NAME_LIMIT = 64
_CONDITIONAL_MAX_ORDER = 5
"""Finding the stationary contexts of a larger table would take minutes."""


def load_model(path: str | Path) -> Model:
    """Read and validate a model document.

    Parameters
    ----------
    path
        A JSON file.

    Raises
    ------
    ModelError
        The file cannot be read, is not JSON, or a key in it is invalid; the message names the
        file and the key.
    """
    try:
        document = json.loads(Path(path).read_text(encoding="utf-8"))
    except OSError as error:
        raise ModelError(f"{path}: cannot be read ({error.strerror}); check the name") from None
    except UnicodeDecodeError:
        raise ModelError(f"{path}: not a text file; a model document is JSON") from None
    except json.JSONDecodeError as error:
        raise ModelError(f"{path}, line {error.lineno}: not valid JSON ({error.msg})") from None
    try:
        return model_from_dict(document)
    except ModelError as error:
        raise ModelError(f"{path}: {error}") from None


def model_from_dict(document: Any) -> Model:
    """Return the model that a document describes.

    Parameters
    ----------
    document
        What the JSON file holds.

    Raises
    ------
    ModelError
        A key is missing, unknown or invalid; the message names it.
    """
    if not isinstance(document, dict):
        raise ModelError("a model document is a JSON object")
    if document.get("format") != FORMAT:
        raise ModelError(f"format: '{document.get('format')}' is not '{FORMAT}'")
    if document.get("version") != VERSION:
        raise ModelError(f"version: {document.get('version')!r} is not known; it must be {VERSION}")
    _check_keys("", document, _KEYS, _KEYS - _OPTIONAL)
    order, symmetric = document["order"], document["symmetric"]
    if not isinstance(order, int) or isinstance(order, bool) or not 0 <= order <= MAX_ORDER:
        raise ModelError(f"order: {order!r} is not a whole number between 0 and {MAX_ORDER}")
    if not isinstance(symmetric, bool):
        raise ModelError(f"symmetric: {symmetric!r} is neither true nor false")
    if not isinstance(document["states"], list) or not document["states"]:
        raise ModelError("states: must be a list of at least one state")
    states = [_read_state(i, state, order) for i, state in enumerate(document["states"])]
    start = document["start"]
    stationary = start == STATIONARY
    count = len(states)
    return Model(
        names=tuple(name for name, _, _, _ in states),
        reported=tuple(reported for _, reported, _, _ in states),
        stages=tuple(stages for _, _, stages, _ in states),
        order=order,
        symmetric=symmetric,
        start_kind=STATIONARY if stationary else FREE,
        start=None if stationary else _numbers("start", start, (count,)),
        transitions=_numbers("transitions", document["transitions"], (count, count)),
        joint=np.array([joint for _, _, _, joint in states]),
        training=document.get("training"),
    )


def model_to_dict(model: Model) -> dict[str, Any]:
    """Return the document of a model; reading it back gives the same parameters to the bit."""
    return {
        "format": FORMAT,
        "version": VERSION,
        "order": model.order,
        "symmetric": model.symmetric,
        "start": (
            STATIONARY if model.start_kind == STATIONARY else model.start_probabilities.tolist()
        ),
        "states": [
            {
                "name": model.names[state],
                "reported": model.reported[state],
                "stages": model.stages[state],
                "joint": model.joint[state].tolist(),
            }
            for state in range(model.states)
        ],
        "transitions": model.transitions.tolist(),
        "training": model.training,
    }


def _check_keys(where: str, found: Mapping[str, Any], known: set[str], needed: set[str]) -> None:
    for key in found:
        if key not in known:
            raise ModelError(f"{where}{key}: unknown key; known are {', '.join(sorted(known))}")
    for key in sorted(needed):
        if key not in found:
            raise ModelError(f"{where}{key}: missing")


def _read_state(index: int, state: Any, order: int) -> tuple[str, bool, int, NDArray[np.float64]]:
    where = f"states[{index}]"
    if not isinstance(state, dict):
        raise ModelError(f"{where}: must be an object with name, reported and joint")
    _check_keys(f"{where}.", state, _STATE_KEYS, {"name", "reported"})
    name, reported = state["name"], state["reported"]
    if not isinstance(name, str) or not is_plain_name(name):
        raise ModelError(
            f"{where}.name: {name!r} must be 1 to {_NAME_LIMIT} letters, digits, '-' or '.'"
        )
    if not isinstance(reported, bool):
        raise ModelError(f"{where}.reported: {reported!r} is neither true nor false")
    stages = state.get("stages", 1)
    if not isinstance(stages, int) or isinstance(stages, bool) or stages < 1:
        raise ModelError(f"{where}.stages: {stages!r} is not a whole number from 1 up")
    if ("joint" in state) == ("conditional" in state):
        raise ModelError(f"{where}: give either joint or conditional")
    if "joint" in state:
        joint = _numbers(f"{where}.joint", state["joint"], (4 ** (order + 1),))
        return name, reported, stages, joint
    if order > _CONDITIONAL_MAX_ORDER:
        raise ModelError(
            f"{where}.conditional: possible up to order {_CONDITIONAL_MAX_ORDER}; give joint"
        )
    rows = _numbers(f"{where}.conditional", state["conditional"], (4**order, 4))
    return name, reported, stages, joint_of_chain(f"{where}.conditional", rows)


def is_plain_name(name: str) -> bool:
    """Tell whether a state's name can stand in a file name and in every track format."""
    return (
        0 < len(name) <= _NAME_LIMIT
        and name.isascii()
        and all(letter.isalnum() or letter in "-." for letter in name)
        and name[0].isalnum()
    )


def _numbers(where: str, values: Any, shape: tuple[int, ...]) -> NDArray[np.float64]:
    """Return nested lists of numbers as an array of the given shape."""
    if len(shape) > 1:
        if not isinstance(values, list) or len(values) != shape[0]:
            raise ModelError(f"{where}: must be a list of {shape[0]} rows")
        rows = [_numbers(f"{where}[{i}]", row, shape[1:]) for i, row in enumerate(values)]
        return np.array(rows)
    if not isinstance(values, list) or len(values) != shape[0]:
        raise ModelError(f"{where}: must be a list of {shape[0]} numbers")
    for i, value in enumerate(values):
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise ModelError(f"{where}[{i}]: {value!r} is not a number")
    return np.array(values, dtype=np.float64)


def joint_of_chain(where: str, rows: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the word probabilities of the stationary chain with these conditionals.

    ``rows`` is float64[context, symbol]; ``where`` is what messages call it.
    """
    contexts = len(rows)
    for index, row in enumerate(rows):
        if not np.isfinite(row).all() or row.min() < 0 or abs(row.sum() - 1) > 1e-6:
            raise ModelError(f"{where}[{index}]: not a distribution that sums to 1")
    if contexts == 1:
        return rows[0]
    machine = np.zeros((contexts, contexts))
    for context in range(contexts):
        for base in range(4):
            machine[context, (4 * context + base) % contexts] += rows[context, base]
    try:
        share = stationary_distribution(machine)
    except ModelError:
        raise ModelError(f"{where}: its contexts never all reach each other; give joint") from None
    return (share[:, None] * rows).reshape(-1)
