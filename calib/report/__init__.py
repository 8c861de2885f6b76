"""Frozen results -> figures, HTML and JSON; computes nothing."""
