"""Heads to estimates: a run's line, outlying readings, wall roughness. Arrays in, small frozen results out."""
