"""A Hamiltonian and a filling go in; lower bounds of its gaps that hold at every k come out."""
