"""The sweep: one YAML file, one study; its points, series, blocks, seeds and costs."""
