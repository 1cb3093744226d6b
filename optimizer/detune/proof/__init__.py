"""Floor 4: bounds over boxes and intervals, and their record."""
