"""Floor 7: tables, plots and the page."""
