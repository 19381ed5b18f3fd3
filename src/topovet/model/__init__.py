"""Records of a case go in; an immutable tight-binding model H(R), H(k) with its basis comes out."""
