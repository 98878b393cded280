"""Tempering: what it finds, how it stops and goes on, and what it refuses."""
