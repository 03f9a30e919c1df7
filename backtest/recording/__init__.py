"""The run folder: what a run keeps, written atomically."""
