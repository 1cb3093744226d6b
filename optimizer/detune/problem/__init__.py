"""Floor 4: the brief as requirements over batches of designs."""
