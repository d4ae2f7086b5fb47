"""The statistics of one study, from its tallies."""
