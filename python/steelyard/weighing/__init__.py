"""Weights, preflight, and what the verdict rests on."""
