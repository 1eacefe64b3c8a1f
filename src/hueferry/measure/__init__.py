"""What separates two palettes, and how much of it is noise."""
