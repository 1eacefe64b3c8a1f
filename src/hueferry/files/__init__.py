"""Pictures in and out of files, atomically."""
