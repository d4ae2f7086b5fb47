"""Weftbook, a registry of crossed trials with an exact memory."""
