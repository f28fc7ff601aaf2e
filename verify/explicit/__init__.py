"""Search over explicit total states: the graph of what is reachable, and what the properties read off it."""
