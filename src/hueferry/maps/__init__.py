"""Colour to colour: one protocol, many maps."""
