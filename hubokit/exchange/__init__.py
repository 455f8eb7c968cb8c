"""Files, and the objects of other libraries."""
