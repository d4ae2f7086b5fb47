"""Pages, served by Flask."""
