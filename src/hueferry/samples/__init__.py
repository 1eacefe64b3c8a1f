"""The sample pictures of Marrowfield Tileworks, rendered by code."""
