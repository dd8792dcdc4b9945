"""Stage fit: exponents of one series at each size, over windows and models, with jackknife copies."""
