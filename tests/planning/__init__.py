"""Scenario plans and the table that they fill."""
