"""How fast the kernels are, beside named peers; see ``__main__``."""
