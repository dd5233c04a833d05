"""The fit stage."""
