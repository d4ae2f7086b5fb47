"""Ground that several tests stand on."""
