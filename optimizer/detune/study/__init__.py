"""Floor 6: studies, fronts, reasons and results."""
