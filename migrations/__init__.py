"""Steps from one version of the tables to the next; applied by `weftbook upgrade`."""
