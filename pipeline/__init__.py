"""Graph files, plans, the store and execution. Knows no mesh."""
