"""The calibrate stage."""
