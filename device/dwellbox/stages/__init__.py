"""The stages of a run, in the order they come."""
