"""Leaving out: against closed forms, plain twins and refits."""
