"""What can be wrong with an asset: one file for each group of findings, pure functions of a part."""
