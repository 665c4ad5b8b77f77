"""Control laws of a bakery."""
