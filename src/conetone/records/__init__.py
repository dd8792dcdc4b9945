"""Tables on disk: schemas, atomic and checksummed files, provenance."""
