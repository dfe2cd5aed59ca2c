"""Parameters of hidden Markov models and Markov chains, and the document that holds them."""

from hmmseg.model.document import load_model, model_from_dict, model_to_dict
from hmmseg.model.parameters import Model

__all__ = ["Model", "load_model", "model_from_dict", "model_to_dict"]
