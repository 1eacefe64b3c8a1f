"""Encodings and profiles, colour spaces, differences, optical density, gamut."""
