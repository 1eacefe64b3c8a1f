"""Stained sections of any size, in optical density, window by window."""
