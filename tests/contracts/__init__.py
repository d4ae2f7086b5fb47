"""Contracts between parts that no type checker sees."""
