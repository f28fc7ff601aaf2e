"""Search over sets of total states as formulas: property-directed reachability, guessed invariants, certificates."""
