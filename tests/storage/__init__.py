"""Tests of registry.storage."""
