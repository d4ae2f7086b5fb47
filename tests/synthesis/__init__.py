"""Tests of registry.synthesis."""
