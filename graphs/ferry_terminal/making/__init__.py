"""What makes the props of the ferry terminal."""
