"""Stage operators: the matrices of an order whose spectra are measured."""
