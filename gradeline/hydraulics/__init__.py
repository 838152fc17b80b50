"""Pure functions over float arrays, SI in and SI out: fluids, friction, manometry, losses, grade lines."""
