"""Exact counting of all pixels, and its reduction to a weighted point cloud."""
