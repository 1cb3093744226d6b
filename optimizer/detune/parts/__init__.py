"""Floor 2: catalogs of parts, read and checked."""
