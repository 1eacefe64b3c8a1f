"""A record as pages and pictures for people."""
