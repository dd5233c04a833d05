"""The trace stage."""
