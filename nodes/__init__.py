"""Every node kind, one file each: `weld.py` holds `weld`, a graph file says `node: weld`."""
