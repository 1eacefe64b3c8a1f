"""A table onto a picture, window by window."""
