"""The props of an invented ferry terminal."""
