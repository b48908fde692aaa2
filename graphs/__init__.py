"""Ready-made graph files, and the demo library they run on."""
