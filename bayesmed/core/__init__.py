"""Plain numpy and scipy: the map, contrasts, tipping draws, sufficient statistics. No labels, no I/O."""
