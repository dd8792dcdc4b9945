"""conetone: spectral exponents of causal sets, each with an error bar that holds."""

__version__ = "0.1.0"
