"""Tests of registry.exchange."""
