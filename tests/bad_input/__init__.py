"""Wrong inputs: each is refused with its own error that says what came and what to do."""
