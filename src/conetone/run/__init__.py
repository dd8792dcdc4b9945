"""Running a sweep: the lock, what a dead run left, Snakemake, progress, and the closing table."""
