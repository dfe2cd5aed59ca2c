"""What a user can be told: one class for each kind of cause.

Every message is one line that says what is wrong, where, and what to do about it.
The command line prints it behind ``hmmseg: `` and exits with the class's ``exit_code``.
"""

__all__ = [
    "HmmsegError",
    "LabelError",
    "ModelError",
    "OutputError",
    "SequenceError",
    "TrainingError",
    "UsageError",
]


class HmmsegError(Exception):
    """Base of all errors that are explained to the user in one line."""

    exit_code = 1


class SequenceError(HmmsegError):
    """A sequence file or a record in it cannot be used."""


class ModelError(HmmsegError):
    """A model document is not valid, or does not fit what is asked of it."""


class LabelError(HmmsegError):
    """A file of intervals or labels does not fit the sequence."""


class OutputError(HmmsegError):
    """A result cannot be written, or a written result is not what it should be."""


class TrainingError(HmmsegError):
    """Training cannot go on with what it was given."""


class UsageError(HmmsegError):
    """The call itself is wrong: an option, or a combination of options."""

    exit_code = 2
