"""Stage diagonalise: spectra, each audited by exact sum rules."""
