"""Any map as a lattice, its certificate, and the open formats it is saved in."""
