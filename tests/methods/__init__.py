"""Checks of the mathematics against numpy, scipy, mpmath, closed forms and plain twins."""
