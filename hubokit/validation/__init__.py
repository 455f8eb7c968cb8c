"""Claims about a reduction, and the evidence for them."""
