"""Tests; the tree mirrors the packages."""
