"""Tests against values computed independently of the project (see tests/reference/README.md)."""
