"""Tests of registry.services."""
