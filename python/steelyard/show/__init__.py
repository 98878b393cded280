"""Plots, in a style of our own."""
