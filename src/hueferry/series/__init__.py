"""Many pictures: which belong together, one joint solution, the journal, the workers."""
