"""A `.win` file goes in; cell, atoms, mesh and declared Wannier functions come out."""
