"""How far answers move: sensitivity held to closed forms, reference cases and plain twins."""
