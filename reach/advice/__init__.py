"""Beyond the verdict of a run: what exact tracking would ask, why strikes were missed, what would help."""
