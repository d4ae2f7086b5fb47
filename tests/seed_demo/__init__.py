"""Tests of seed_demo."""
