"""What `tangentry start` writes: a small project that builds at once."""
