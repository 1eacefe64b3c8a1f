"""Property-based targets, one for each reader of pictures: `PYTHONPATH=src:tests python -m fuzz [target] [count]`."""
