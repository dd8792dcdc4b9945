"""One module per stage: read tables, call the science, write tables. Nothing is computed here."""
