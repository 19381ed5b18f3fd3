"""A model and Miller indices go in; surface spectra, films and what they witness come out."""
