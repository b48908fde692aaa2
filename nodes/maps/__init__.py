"""Encodings, relief, conventions: pure functions on texels."""
