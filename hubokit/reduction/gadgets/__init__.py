"""One published family of gadgets a file, and the table of them in ``table.py``."""
