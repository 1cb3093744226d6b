"""Floor 1: the equations, on floats and arrays only."""
