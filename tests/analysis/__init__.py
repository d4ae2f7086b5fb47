"""Tests of registry.analysis."""
