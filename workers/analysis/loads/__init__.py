"""Loads: what each load case puts on the nodes."""
