"""An invented parts depot to look around in."""
