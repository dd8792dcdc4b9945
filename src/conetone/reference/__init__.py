"""Closed forms and expected exponents, each with its source and its standing."""
