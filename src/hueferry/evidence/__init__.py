"""What a correction may rest on: pairs, palettes, a prior, and the judged choice between them."""
