"""The load stage."""
