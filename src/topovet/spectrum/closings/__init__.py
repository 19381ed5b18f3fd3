"""A Hamiltonian and a filling go in; every place where the gap closes comes out, or stays open."""
