"""Many studies: common ground, change, pooling, recurrence."""
