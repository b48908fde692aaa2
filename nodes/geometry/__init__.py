"""Pure functions on arrays."""
