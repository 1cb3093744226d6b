"""Floor 4: continuous sizing of stiffness, damping and ballast on plain arrays."""
