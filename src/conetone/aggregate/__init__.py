"""Stage aggregate: extrapolation to infinite size, resampled as a whole."""
