"""Stage sprinkle: random orders, naturally labelled and bit-packed."""
