"""Journeys through the pages in a real browser."""
