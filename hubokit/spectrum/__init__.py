"""Energies of many states: exhaustion, elimination, neighbourhoods."""
