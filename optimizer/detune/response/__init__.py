"""Floor 3: from a machine and a design to matrices, responses and an assessment."""
