"""The identify stage."""
