"""A model and Miller indices go in; half-crystals, slabs, their surface spectra and what they witness come out."""
