"""A crystal and a model go in; the operations they share, each with its residual, come out."""
