"""Arrays in, plans out."""
