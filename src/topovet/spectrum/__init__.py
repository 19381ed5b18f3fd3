"""A model and a filling go in; bands, gaps and occupied subspaces come out."""
