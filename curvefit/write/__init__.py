"""The write stage."""
