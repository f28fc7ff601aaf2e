"""Readers: one file for each form in which a circuit is written. Each gives a `Netlist` or raises `InputError`."""
