"""Order reduction: from k-local to quadratic."""
