"""Tests of registry.trials."""
