"""How fast and how frugal it is, as ratios to what the machine can do at all: `python -m tests.bench --help`."""
