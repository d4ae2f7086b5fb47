"""Tests of registry.planning."""
