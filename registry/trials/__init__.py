"""The vocabulary of crossed trials, on the standard library alone."""
