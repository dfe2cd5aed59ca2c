"""The command ``adopt``: take a model document as it is for another assembly."""

from pathlib import Path

from hmmseg.model import Model, load_model
from hmmseg.outputs import check_target, whole_file
from hmmseg.provenance import write_provenance

__all__ = ["adopt"]


def adopt(model: str, output: str, force: bool) -> Model:
    """Check a model document, copy it byte by byte, and return what it says.

    Parameters
    ----------
    model
        The document.
    output
        The copy to write; its provenance goes beside it.
    force
        Replace an existing document.

    Raises
    ------
    ModelError
        The document is no valid model.
    """
    check_target(output, force)
    found = load_model(model)
    with whole_file(output, force=force) as temporary:
        temporary.write_bytes(Path(model).read_bytes())
    write_provenance(output, "adopt", {"model": Path(model)}, None, [model], [output])
    return found
