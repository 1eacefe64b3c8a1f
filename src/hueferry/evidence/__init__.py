"""Telling light from content: pairs, palettes, prior, and the choice between them."""
