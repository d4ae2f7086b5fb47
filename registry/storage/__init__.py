"""The only place that speaks to a database."""
