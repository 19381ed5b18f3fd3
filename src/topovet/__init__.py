"""topovet: vets the band topology of compounds from Wannier90 tight-binding output."""

__version__ = "0.1.0"
