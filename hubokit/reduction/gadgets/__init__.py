"""Gadgets: one file for each published family."""
