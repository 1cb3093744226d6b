"""Floor 0: units and errors."""
